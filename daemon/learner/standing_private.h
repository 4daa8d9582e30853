/*
 * standing_private: the standing's own insides, for the files that are the standing together:
 * standing (adding and asking) and standing_parts (storing).
 */
#ifndef UNDERTAG_STANDING_PRIVATE_H
#define UNDERTAG_STANDING_PRIVATE_H

#include <stddef.h>
#include <stdint.h>

#include "daemon/learner/reliability.h"
#include "daemon/learner/standing.h"
#include "daemon/learner/standing_tally.h"

enum {
    STANDING_CELLS = STANDING_BLOCKS + STANDING_SEGMENTS,
    STANDING_META_PART = 0,
    STANDING_PARTS = 1 + STANDING_CELLS * STANDING_BANDS
};

/*
 * Cells are the blocks' ring, then the segments; a tally by band each. Where everything is follows
 * from `items` alone: items / 64 blocks are closed, the i-th lies at i % STANDING_BLOCKS, and the
 * open one after the newest, where until its first item the oldest still lies. A block is added to
 * its segment when it closes.
 */
struct standing {
    uint64_t items;
    struct reliability reliability;
    struct tally cells[STANDING_CELLS][STANDING_BANDS];
    uint8_t changed[STANDING_PARTS];
    uint8_t sealed[STANDING_PARTS];
};

static inline size_t standing_cell_part(size_t cell, size_t band)
{
    return 1 + cell * STANDING_BANDS + band;
}

#endif
