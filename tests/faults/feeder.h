/*
 * feeder: sends what the ledger draws to a daemon, many changes at a time, and takes their
 * acknowledgements, each of which must say what the ledger says.
 */
#ifndef UNDERTAG_TESTS_FEEDER_H
#define UNDERTAG_TESTS_FEEDER_H

#include "tests/faults/ledger.h"
#include "tests/integration/peer.h"

enum {
    FEEDER_WINDOW = 64, /* changes under way */
    FEEDER_TAGS_BYTES = 1024
};

struct feeder {
    struct ledger *ledger;
    struct peer peer;
    unsigned round;
    unsigned ids[FEEDER_WINDOW]; /* of the requests under way */
};

void feeder_open(struct feeder *feeder, struct ledger *ledger, const char *socket, unsigned round);

/* Sends one change if there is room for it and `more`, and takes the answers that are there. Waits
 * a millisecond at most, and not at all if `at_once`. */
void feeder_pump(struct feeder *feeder, bool more, bool at_once);

/* Waits for all acknowledgements. */
void feeder_drain(struct feeder *feeder);

/* The daemon was killed: acknowledgements that it had sent before count as well. */
void feeder_close_after_kill(struct feeder *feeder);

/* Sends again, to another daemon, the changes of the ledger behind `before` up to `last`. */
void feeder_repeat(const struct ledger *ledger, struct peer *peer, unsigned before, unsigned last);

/* How the tagger of a filing and the other ones are called. */
const char *feeder_tagger(void);
const char *feeder_other_tagger(unsigned number);

/* The title and the text of the filing that change k is. */
enum {
    FEEDER_TITLE_BYTES = 48,
    FEEDER_TEXT_BYTES = 12 * 320 + 1
};
void feeder_title(const struct change *change, unsigned k, char title[FEEDER_TITLE_BYTES]);
void feeder_text(const struct change *change, char text[FEEDER_TEXT_BYTES]);

/* Whether a list of names is this set. */
bool feeder_is_set(const struct ledger *ledger, const json_t *names, const struct tag_set *set);

#endif
