/*
 * ledger: what the daemon has acknowledged and what it has refused, so that both can be looked for
 * later: an item by its id, and the tags that it must have.
 */
#ifndef UNDERTAG_TESTS_LEDGER_H
#define UNDERTAG_TESTS_LEDGER_H

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
    LEDGER_ID_BYTES = 24,
    LEDGER_TAGS_BYTES = 128
};

#define LEDGER_GONE "gone"

struct ledger_entry {
    char id[LEDGER_ID_BYTES];
    const char *before; /* tags in order, "bell,fog", or LEDGER_GONE */
    const char *after;  /* once the change is made */
    enum outcome outcome;
};

struct ledger {
    struct ledger_entry *entries;
    size_t count;
    size_t capacity;
};

void ledger_deinit(struct ledger *ledger);

void ledger_note(struct ledger *ledger, const char *id, const char *before, const char *after,
                 enum outcome outcome);

/* What an answer says; takes it. */
enum outcome outcome_take(json_t *answer, bool hangs);

/* Whether what item.show answers is what must be there; NULL, or what is wrong. `ret_found` is what
 * the item has. */
const char *ledger_compare(const struct ledger_entry *entry, const json_t *answer,
                           char ret_found[LEDGER_TAGS_BYTES]);

#endif
