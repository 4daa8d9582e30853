/*
 * command: what the commands share: the table they stand in, the client they run in, and the ways
 * to ask the daemon and to show what it answered.
 */
#ifndef UNDERTAG_CLIENT_COMMAND_H
#define UNDERTAG_CLIENT_COMMAND_H

#include <jansson.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "client/args.h"
#include "client/failure.h"
#include "client/reply.h"
#include "client/screen.h"
#include "client/wire.h"

struct client {
    const char *socket_path; /* borrowed */
    bool json;
    struct screen out;
    struct screen err;
};

struct command {
    const char *name;     /* one word, or two: "tags list" */
    const char *synopsis; /* what follows the name and the options */
    const char *summary;  /* one line for the list of commands */
    const char *about;    /* paragraphs for --help */
    const struct args_option *options;
    size_t option_count;
    size_t least_words; /* how many words may follow */
    size_t most_words;
    /* 0 or a failure's code. What was said already may leave the message empty. */
    int (*run)(struct client *client, const struct args *args, struct failure *failure);
};

extern const struct command command_file;
extern const struct command command_gaps;
extern const struct command command_show;
extern const struct command command_withdraw;
extern const struct command command_list;
extern const struct command command_tags_list;
extern const struct command command_tags_show;
extern const struct command command_state;
extern const struct command command_rebuild;
extern const struct command command_snapshot_write;
extern const struct command command_snapshot_list;
extern const struct command command_backup;
extern const struct command command_rule;
extern const struct command command_check;
extern const struct command command_sample;
extern const struct command command_worklist;
extern const struct command command_completeness;
extern const struct command command_standing;
extern const struct command command_report;

/* Writes "undertag: " and the sentence, cleaned, to standard error. */
void command_complain(const struct client *client, const char *format, ...)
    __attribute__((format(printf, 2, 3)));

/* Connects, asks one thing, closes. Takes the reference to `params` (NULL: no memory). */
int command_ask_take(const struct client *client, const char *method, json_t *params,
                     struct wire_answer *ret_answer, struct failure *failure)
    __attribute__((warn_unused_result));

/* What to ask, and how to show the answer. */
struct command_question {
    const char *method;
    const struct reply_member *shape; /* what `print` relies on */
    int (*print)(const struct client *client, const json_t *result, const struct args *args);
};

/*
 * Asks and shows: by `print` (-1: no memory) once the answer has the shape, or with --json as it
 * came. Takes the reference to `params` (NULL: no memory).
 */
int command_show_take(const struct client *client, const struct command_question *question,
                      json_t *params, const struct args *args, struct failure *failure)
    __attribute__((warn_unused_result));

/*
 * Prints the result as the daemon sent it and a line end, for --json. Control characters that JSON
 * allows to stand as they are (U+007F to U+009F) are escaped.
 */
void command_print_json(const struct client *client, const struct wire_answer *answer);

/* A string of JSON, or the failure that `what` is not UTF-8 (FAILURE_USAGE) or there is no memory.
 */
int command_string(const char *text, const char *what, json_t **ret_string, struct failure *failure)
    __attribute__((warn_unused_result));

/*
 * Reads all of standard input, at most `limit_bytes`, for `what` ("the draft"): UTF-8 without NUL.
 * The caller frees it. On a terminal, says first how to end it.
 */
int command_read_input(const struct client *client, const char *what, size_t limit_bytes,
                       char **ret_text, size_t *ret_length, struct failure *failure)
    __attribute__((warn_unused_result));

/* 0, or the failure that standard output could not be written. */
int command_flush(struct failure *failure) __attribute__((warn_unused_result));

/* Members of an object, whatever the object is: "" or 0 where they are not of that type. */
const char *command_text(const json_t *object, const char *name);
int64_t command_whole(const json_t *object, const char *name);
double command_number(const json_t *object, const char *name);

#endif
