/*
 * data_file: published data files for the reference tests: Unicode's and Snowball's, as Debian
 * packages them. Static functions, since each test is one file.
 */
#ifndef UNDERTAG_TEST_DATA_FILE_H
#define UNDERTAG_TEST_DATA_FILE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/wait.h>
#include <unistd.h>

#include <utf8proc.h>

enum {
    DATA_LINE_BYTES = 4096
};

struct data_file {
    FILE *lines;
    bool is_piped;
};

/*
 * Opens a file of lines; where only FILE.gz or FILE.bz2 is there, through zcat or bzcat. False when
 * it is not there: the test then says that it was skipped and names the package.
 */
static inline bool data_open(struct data_file *file, const char *path, const char *package)
{
    static const char *const tools[][2] = {{".gz", "zcat"}, {".bz2", "bzcat"}};
    file->is_piped = false;
    file->lines = fopen(path, "r");
    for (size_t i = 0; i < 2 && !file->lines; i++) {
        char packed[512];
        char command[600];
        (void)snprintf(packed, sizeof packed, "%s%s", path, tools[i][0]);
        (void)snprintf(command, sizeof command, "command -v %s >/dev/null && %s %s", tools[i][1],
                       tools[i][1], packed);
        if (access(packed, R_OK) == 0) {
            file->is_piped = true;
            file->lines = popen(command, "r"); /* NOLINT(cert-env33-c): a fixed path of our own */
        }
    }
    if (!file->lines) {
        (void)fprintf(stderr, "skipped: %s is not here (Debian package %s)\n", path, package);
    }
    return file->lines != NULL;
}

/* Whether all was read and the unpacking, where there was one, went well. */
static inline bool data_close(struct data_file *file)
{
    bool is_read = !ferror(file->lines);
    int status = file->is_piped ? pclose(file->lines) : fclose(file->lines);
    return is_read && status == 0;
}

/* The next line without its end, or false at the end of the file. */
static inline bool data_line(struct data_file *file, char line[DATA_LINE_BYTES])
{
    if (!fgets(line, DATA_LINE_BYTES, file->lines)) {
        return false;
    }
    line[strcspn(line, "\r\n")] = '\0';
    return true;
}

/* "00E9 0301 …" into UTF-8, up to anything else; returns its bytes, at most `room`. */
static inline size_t data_points(const char *list, char *text, size_t room)
{
    size_t bytes = 0;
    char *end = NULL;
    for (;;) {
        unsigned long point = strtoul(list, &end, 16);
        if (end == list || bytes + 4 > room) {
            return bytes;
        }
        bytes += (size_t)utf8proc_encode_char((int32_t)point, (utf8proc_uint8_t *)text + bytes);
        list = end;
    }
}

#endif
