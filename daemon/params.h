/*
 * params: reading the members of a request, each checked before anything is done. Every function
 * returns 0, or the fault's code with the fault filled: it names the member by its JSON Pointer and
 * says what is allowed. Texts are borrowed from params.
 */
#ifndef UNDERTAG_PARAMS_H
#define UNDERTAG_PARAMS_H

#include <jansson.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "daemon/fault.h"
#include "storage/items.h"

enum {
    PARAMS_NAME_BYTES = 255,
    PARAMS_NAMES_MOST = 100000, /* of one list; a longer one is not even looked at */
    PARAMS_LANGUAGE_BYTES = 35, /* RFC 5646, section 4.4.1: what every program should take */
    PARAMS_TIME_BYTES = 32
};

/* Refuses a member that is not in `names` (ended by NULL). */
int params_known(const json_t *params, const char *const *names, struct fault *fault)
    __attribute__((warn_unused_result));

bool params_has(const json_t *params, const char *member);

/* An id, a tag or the like: 1 to 255 bytes of UTF-8 in NFC without control characters. It must be
 * there. */
int params_name(const json_t *params, const char *member, struct store_text *ret_name,
                struct fault *fault) __attribute__((warn_unused_result));

/* The same where it may be absent: then *ret_name is empty. */
int params_optional_name(const json_t *params, const char *member, struct store_text *ret_name,
                         struct fault *fault) __attribute__((warn_unused_result));

/* A text of at most `limit` bytes (an option called `limit_name`); empty where absent. */
int params_text(const json_t *params, const char *member, size_t limit, const char *limit_name,
                struct store_text *ret_text, struct fault *fault)
    __attribute__((warn_unused_result));

/* A language's code: letters, digits and hyphens; empty where absent. */
int params_language(const json_t *params, const char *member, struct store_text *ret_language,
                    struct fault *fault) __attribute__((warn_unused_result));

/* A time of RFC 3339, written to `text` (PARAMS_TIME_BYTES) in UTC; "" where absent. */
int params_time(const json_t *params, const char *member, char *text, struct fault *fault)
    __attribute__((warn_unused_result));

/* A whole number within bounds; *ret_value stays as it is where absent. */
int params_whole(const json_t *params, const char *member, uint64_t minimum, uint64_t maximum,
                 uint64_t *ret_value, struct fault *fault) __attribute__((warn_unused_result));

/* A number from 0 to 1; likewise. */
int params_share(const json_t *params, const char *member, double *ret_value, struct fault *fault)
    __attribute__((warn_unused_result));

/* true or false; likewise. */
int params_flag(const json_t *params, const char *member, bool *ret_value, struct fault *fault)
    __attribute__((warn_unused_result));

/* One of `choices` (ended by NULL), by its place; likewise. */
int params_choice(const json_t *params, const char *member, const char *const *choices,
                  size_t *ret_choice, struct fault *fault) __attribute__((warn_unused_result));

/* A list of names, none twice, in the order of their bytes. */
struct params_names {
    struct store_text *names;
    size_t *given_at; /* by name: its first place in the list as given */
    size_t count;
};

void params_names_deinit(struct params_names *names);

/* Reads a list of names, as a set; empty where absent. */
int params_names(const json_t *params, const char *member, struct params_names *ret_names,
                 struct fault *fault) __attribute__((warn_unused_result));

bool params_names_hold(const struct params_names *names, struct store_text name);

#endif
