/*
 * The file of options: `name = value` lines, # and ; before comments.
 *
 * The lines are read here and handed to the parser one by one: without their indentation, which it
 * would take for the going on of the line before, and with over-long comments cut, whose rest it
 * would take for a line of its own.
 */
#include <errno.h>
#include <ini.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/options.h"

struct reading {
    FILE *file;
    int line; /* the number of the line read last, from 1 */
    bool is_cut;
    struct options options;
    bool *is_set; /* by place in the table */
    int wrong;    /* the first line that is wrong; 0: none yet */
    char reason[OPTIONS_ERROR_BYTES];
};

/* The rest of a line that did not fit. */
static void skip_rest(struct reading *reading)
{
    int byte = 0;
    do {
        byte = fgetc(reading->file);
    } while (byte != '\n' && byte != EOF);
}

/* Keeps the reason of the first line that is wrong; returns 0, as the parser wants it. */
__attribute__((format(printf, 2, 3))) static int refuse_line(struct reading *reading,
                                                             const char *format, ...)
{
    if (reading->wrong == 0) {
        va_list arguments;
        va_start(arguments, format);
        (void)vsnprintf(reading->reason, sizeof reading->reason, format, arguments);
        va_end(arguments);
        reading->wrong = reading->line;
    }
    return 0;
}

/* Like fgets; `room` is the parser's. */
static char *next_line(char *line, int room, void *user)
{
    struct reading *reading = user;
    if (!fgets(line, room, reading->file)) {
        return NULL;
    }
    reading->line++;
    size_t length = strlen(line);
    reading->is_cut = length + 1 == (size_t)room && line[length - 1] != '\n';
    if (reading->is_cut) {
        skip_rest(reading);
        line[length - 1] = '\n';
    }
    size_t indent = strspn(line, " \t");
    memmove(line, line + indent, length + 1 - indent);
    if (line[0] == '[') {
        (void)refuse_line(reading, "there are no sections: options stand by themselves");
    }
    return line;
}

static int take_line(void *user, const char *section, const char *name, const char *value)
{
    (void)section;
    struct reading *reading = user;
    char error[OPTIONS_ERROR_BYTES];
    size_t place = options_find(name);
    if (reading->is_cut) {
        return refuse_line(reading, "the line is too long");
    }
    if (place < options_count() && reading->is_set[place]) {
        return refuse_line(reading, "option %s is set twice", name);
    }
    if (options_set(&reading->options, name, value, error) < 0) {
        return refuse_line(reading, "%s", error);
    }
    reading->is_set[place] = true;
    return 1;
}

static int read_lines(struct reading *reading, const char *path, char *error)
{
    int line = ini_parse_stream(next_line, reading, take_line, reading);
    if (ferror(reading->file)) {
        (void)snprintf(error, OPTIONS_ERROR_BYTES, "%.200s cannot be read: %s", path,
                       strerror(errno));
        return -1;
    }
    if (reading->wrong != 0 && (line == 0 || reading->wrong <= line)) {
        (void)snprintf(error, OPTIONS_ERROR_BYTES, "%.120s, line %d: %.340s", path, reading->wrong,
                       reading->reason);
        return -1;
    }
    if (line != 0) {
        (void)snprintf(error, OPTIONS_ERROR_BYTES,
                       "%.120s, line %d: it is not of the form name = value", path, line);
        return -1;
    }
    return 0;
}

int options_read_file(struct options *options, const char *path, char *error)
{
    struct reading reading = {.options = *options};
    reading.is_set = calloc(options_count(), sizeof *reading.is_set);
    reading.file = reading.is_set ? fopen(path, "re") : NULL;
    if (!reading.file) {
        (void)snprintf(error, OPTIONS_ERROR_BYTES, "%.200s cannot be read: %s", path,
                       strerror(errno));
        free(reading.is_set);
        return -1;
    }
    int result = read_lines(&reading, path, error);
    if (result == 0) {
        *options = reading.options;
    }
    (void)fclose(reading.file); /* it was only read */
    free(reading.is_set);
    return result;
}
