/*
 * readback: holds all that a daemon answers about its items and tags against the ledger.
 */
#ifndef UNDERTAG_TESTS_READBACK_H
#define UNDERTAG_TESTS_READBACK_H

#include "tests/faults/ledger.h"
#include "tests/integration/peer.h"

/*
 * Fails the test unless the daemon has the items of the ledger, each with the contents, the tags
 * and the seq that it must have, and no other; and the tags of the ledger, each with the count that
 * these items give, and no other. Nothing may be under way.
 */
void readback_assert(const struct ledger *ledger, struct peer *peer);

#endif
