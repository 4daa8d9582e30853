/*
 * command_line: what undertagd was started with.
 */
#ifndef UNDERTAG_COMMAND_LINE_H
#define UNDERTAG_COMMAND_LINE_H

#include <stdbool.h>
#include <stddef.h>

#include "daemon/options.h"

enum {
    COMMAND_LINE_ERROR_BYTES = OPTIONS_ERROR_BYTES,
    COMMAND_LINE_PATH_BYTES = 4096
};

/* Strings are borrowed from argv. */
struct command_line {
    char home[COMMAND_LINE_PATH_BYTES];
    char socket[COMMAND_LINE_PATH_BYTES];
    bool socket_is_default; /* then its folder is made */
    const char *config;     /* NULL: none */
    const char **settings;  /* name=value, as given; owned */
    size_t setting_count;
    bool check_config;
    bool verify;
    const char *restore; /* the backup to make a home of; NULL: none */
    bool version;
    bool help;
};

/* Reads argv; the places that it does not name come from the environment. Returns 0, or an exit
 * code with a sentence in `error`. */
int command_line_read(int argc, char **argv, struct command_line *ret_line, char *error)
    __attribute__((warn_unused_result));

void command_line_deinit(struct command_line *line);

/* The options: defaults, then the file, then --set. Returns 0, or an exit code with a sentence. */
int command_line_options(const struct command_line *line, struct options *ret_options, char *error)
    __attribute__((warn_unused_result));

extern const char COMMAND_LINE_HELP[];

#endif
