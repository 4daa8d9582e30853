/*
 * ledger: what a home must hold, by what its daemon was sent and has acknowledged.
 *
 * Change k of the ledger gets seq k, and every change takes effect (none is refused, none is "the
 * same"), so that the seq that a daemon comes back with says which of them it has: the first so
 * many, each once. Which text, tags and rulings every item must have then follows from them here,
 * by the rules of daemon/WIRE.md and without the daemon's code.
 */
#ifndef UNDERTAG_TESTS_LEDGER_H
#define UNDERTAG_TESTS_LEDGER_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "tests/faults/tag_set.h"

enum {
    LEDGER_ITEMS = 400,
    LEDGER_BASE_TAGS = 8,    /* opened by change 1 */
    LEDGER_OTHER_TAGGERS = 2 /* who tag items a second time */
};

enum change_kind {
    CHANGE_FILE,
    CHANGE_WITHDRAW,
    CHANGE_RULE,
    CHANGE_CHECK,
    CHANGE_TAG_AGAIN
};

struct change {
    enum change_kind kind;
    unsigned item;
    unsigned round;      /* in which it was drawn: lost, it never comes again as it was */
    unsigned number;     /* of the logbook's entry whose words a filing has, */
    unsigned words;      /* and how many of them */
    unsigned opens;      /* tags that come into the vocabulary by it */
    unsigned tagger;     /* of a second tagging */
    bool is_random;      /* a check of an item drawn at random */
    struct tag_set tags; /* filed, ruled `belongs`, the whole list of a check, a second tagging */
    struct tag_set prompted; /* of a filing */
    struct tag_set against;  /* declined in a filing, ruled `not` */
};

/* An item as it must be. */
struct ledger_item {
    unsigned seq; /* of its latest change; 0: there was none */
    bool stands;  /* otherwise it was withdrawn, or never filed */
    unsigned filed_seq;
    struct tag_set filed;
    struct tag_set prompted;
    struct tag_set declined;
    struct tag_set belongs; /* ruled so */
    struct tag_set denied;
    bool is_checked;
    bool is_random; /* the check, or one before it */
    bool filed_after_check;
    struct tag_set checked;
    bool is_tagged_again[LEDGER_OTHER_TAGGERS];
    struct tag_set again[LEDGER_OTHER_TAGGERS];
};

/* All items after the first `seq` changes. */
struct ledger_state {
    unsigned seq;
    unsigned tags; /* of the vocabulary, which are the first so many names */
    struct ledger_item items[LEDGER_ITEMS];
};

struct ledger {
    uint64_t seed;
    struct ledger_state sent;         /* as if all that was sent were in */
    struct ledger_state acknowledged; /* what must be in */
    struct change *changes;           /* change k at k - 1, up to sent.seq */
    size_t change_capacity;
    char **names; /* of tags, by number */
    size_t name_capacity;
};

void ledger_init(struct ledger *ledger, uint64_t seed);
void ledger_deinit(struct ledger *ledger);

/* Change k, which has been sent. */
const struct change *ledger_change(const struct ledger *ledger, unsigned k);

/* Draws the next change, as a function of the seed, the round and all that was sent before. It
 * counts as sent. */
const struct change *ledger_draw(struct ledger *ledger, unsigned round);

/* The first change not acknowledged yet now is. */
void ledger_acknowledge(struct ledger *ledger);

/* The daemon came back with the first `seq` changes, not fewer than acknowledged, and not more than
 * sent. The others are forgotten. */
void ledger_settle(struct ledger *ledger, unsigned seq);

/* The tags that an item has now. */
struct tag_set ledger_tags_of(const struct ledger_item *item);

#endif
