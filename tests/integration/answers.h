/*
 * answers: all that a daemon answers about some items and some drafts, in one text, so that two
 * models can be held against each other to the last bit that shows.
 */
#ifndef UNDERTAG_TESTS_ANSWERS_H
#define UNDERTAG_TESTS_ANSWERS_H

#include "tests/integration/peer.h"

/* About every item that item.list has, in order of ids "entry N" below `items`, and 20 drafts.
 * Lives until the peer is closed. */
const char *answers_of(struct peer *peer, unsigned items);

/* Waits until no rebuild is under way. */
void wait_until_rebuilt(struct peer *peer);

#endif
