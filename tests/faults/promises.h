/*
 * promises: what the daemon has acknowledged and what it has refused, so that both can be looked
 * for later: an item by its id, and the tags that it must have.
 */
#ifndef UNDERTAG_TESTS_PROMISES_H
#define UNDERTAG_TESTS_PROMISES_H

#include <jansson.h>
#include <stdbool.h>
#include <stddef.h>

enum outcome {
    ACKNOWLEDGED, /* a result */
    REFUSED,      /* an error, which says what is the matter */
    UNANSWERED,   /* the connection was closed, or never opened */
    NOT_IN_TIME,  /* it hangs */
    WRONG_BLAME   /* an error that the request has no part in blames it, or nothing is said */
};

enum {
    PROMISE_ID_BYTES = 24,
    PROMISE_TAGS_BYTES = 128
};

#define PROMISE_GONE "gone"

struct promise {
    char id[PROMISE_ID_BYTES];
    const char *before; /* tags in order, "bell,fog", or PROMISE_GONE */
    const char *after;  /* once the change is made */
    enum outcome outcome;
};

struct promises {
    struct promise *entries;
    size_t count;
    size_t capacity;
};

void promises_deinit(struct promises *promises);

void promises_note(struct promises *promises, const char *id, const char *before, const char *after,
                   enum outcome outcome);

/* What an answer says; takes it. */
enum outcome outcome_take(json_t *answer, bool hangs);

/* Whether what item.show answers is what must be there; NULL, or what is wrong. `ret_found` is what
 * the item has. */
const char *promises_compare(const struct promise *entry, const json_t *answer,
                             char ret_found[PROMISE_TAGS_BYTES]);

#endif
