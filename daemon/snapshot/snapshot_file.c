#include "daemon/snapshot/snapshot_file.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

enum {
    FLOAT_DIGITS = 9,  /* as many as tell two floats apart */
    DOUBLE_DIGITS = 17 /* likewise two doubles */
};

int snapshot_fail(struct store_error *error, const char *name, int errnum)
{
    bool is_full = errnum == ENOSPC || errnum == EDQUOT;
    return store_fail(error, is_full ? STORE_FULL : STORE_DENIED, "%s cannot be written: %s", name,
                      strerror(errnum));
}

int snapshot_fail_export(struct store_error *error, int code, const char *sentence)
{
    bool is_full = code == -ENOSPC || code == -EDQUOT;
    bool is_of_name = code == -EEXIST || code == -EINVAL;
    return store_fail(error,
                      is_full      ? STORE_FULL
                      : is_of_name ? STORE_REFUSED
                                   : STORE_DENIED,
                      "%s", sentence);
}

int snapshot_file_open(struct export_part *part, const char *name, int *ret_fd,
                       struct store_error *error)
{
    char sentence[EXPORT_ERROR_BYTES];
    int code = export_part_add_file(part, name, ret_fd, sentence);
    return code == 0 ? STORE_OK : snapshot_fail_export(error, code, sentence);
}

int snapshot_file_create(struct export_part *part, const char *name, struct pace *pace,
                         struct store_error *error, struct snapshot_file *ret_file)
{
    int fd = -1;
    int code = snapshot_file_open(part, name, &fd, error);
    if (code != STORE_OK) {
        return code;
    }
    FILE *stream = fdopen(fd, "w");
    if (!stream) {
        int errnum = errno;
        (void)close(fd); /* nothing is in it */
        return snapshot_fail(error, name, errnum);
    }
    *ret_file =
        (struct snapshot_file){.stream = stream, .name = name, .pace = pace, .error = error};
    return STORE_OK;
}

int snapshot_file_add(struct snapshot_file *file, json_t *line)
{
    size_t digits = file->is_exact ? DOUBLE_DIGITS : FLOAT_DIGITS;
    char *text = line ? json_dumps(line, JSON_COMPACT | JSON_REAL_PRECISION(digits)) : NULL;
    json_decref(line);
    if (!text) {
        return store_fail(file->error, STORE_NO_MEMORY, "there is no memory for %s", file->name);
    }
    size_t bytes = strlen(text);
    text[bytes++] = '\n'; /* in the place of the NUL */
    size_t written = fwrite(text, 1, bytes, file->stream);
    int errnum = errno;
    free(text);
    return written == bytes ? pace_add(file->pace, bytes, file->error)
                            : snapshot_fail(file->error, file->name, errnum);
}

int snapshot_file_close(struct snapshot_file *file, int code)
{
    int failed = fclose(file->stream);
    int errnum = errno;
    return code == STORE_OK && failed != 0 ? snapshot_fail(file->error, file->name, errnum) : code;
}

int snapshot_file_write(struct export_part *part, const char *name, json_t *document,
                        struct pace *pace, struct store_error *error)
{
    struct snapshot_file file = {0};
    int code = snapshot_file_create(part, name, pace, error, &file);
    if (code != STORE_OK) {
        json_decref(document);
        return code;
    }
    return snapshot_file_close(&file, snapshot_file_add(&file, document));
}
