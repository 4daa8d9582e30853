/*
 * args: the words and options of a command line, read by one table of options a command.
 *
 * "--name value" and "--name=value" are the same; "--" ends the options; "-" is a word. A value
 * that begins with "--" needs the form with "=". An option given twice is refused unless it is a
 * list. Texts must be UTF-8; paths may be any bytes.
 */
#ifndef UNDERTAG_CLIENT_ARGS_H
#define UNDERTAG_CLIENT_ARGS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>

#include "client/failure.h"

enum args_kind {
    ARGS_FLAG,
    ARGS_TEXT,
    ARGS_LIST, /* a text that may be given again and again */
    ARGS_PATH,
    ARGS_WHOLE,  /* a whole number from least to most */
    ARGS_NUMBER, /* a number from least to most */
    ARGS_SIZE,   /* whole bytes from least to most, such as 64MiB: KiB, MiB, GiB or none */
    ARGS_CHOICE  /* one of the words that `value` lists, separated by "|" */
};

struct args_option {
    const char *name; /* without its dashes */
    enum args_kind kind;
    const char *value; /* what --help calls the value; NULL for a flag */
    double least;
    double most;
    const char *help; /* one sentence without its full stop */
};

struct args_value {
    bool given;
    const char *text; /* borrowed from argv, as are those of the list */
    int64_t whole;
    double number;
    const char **list;
    size_t list_count;
};

/* Read only, after args_parse: values[i] belongs to options[i]. */
struct args {
    const struct args_option *options;
    size_t option_count;
    struct args_value *values;
    const char **words;
    size_t word_count;
};

/* Makes room for what a table of options (borrowed) may be given. -1: no memory. */
int args_init(struct args *args, const struct args_option *options, size_t option_count)
    __attribute__((warn_unused_result));
void args_deinit(struct args *args);

/* Where args_parse stands in an argv that ends with NULL. */
struct args_cursor {
    char **at;
    bool only_words; /* "--" has been passed */
};

/*
 * Reads options of any of the `levels`; words go to the last of them. With `stop_at_word`, stops in
 * front of the first word instead. `hint` ends the sentence of a failure (FAILURE_USAGE), such as
 * "see 'undertag --help'".
 */
int args_parse(struct args *const *levels, size_t level_count, struct args_cursor *cursor,
               bool stop_at_word, const char *hint, struct failure *failure)
    __attribute__((warn_unused_result));

/* Prints the options and their sentences for --help. */
void args_help(const struct args_option *options, size_t option_count, FILE *stream);

/*
 * How many characters must be put in, left out, replaced or swapped with their neighbour to turn
 * one word into the other (the optimal string alignment distance). Words of more than 31 bytes are
 * far from everything.
 */
unsigned args_distance(const char *a, const char *b);

/* True if `given` looks like a slip of the hand for `known`. */
bool args_is_near(const char *given, const char *known);

#endif
