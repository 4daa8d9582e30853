/*
 * worklist_totals: how many entries the worklist has, and how many of them have scores of which
 * age, counted as they come and go. No entry need be read to know it.
 *
 * The counts are in buckets of `scored`, all equally wide: at first one number each. When a number
 * lies beyond the last bucket, neighbours are merged and the width doubles, so that what is asked
 * for is rounded down to the width. Not more than one part in 2,048 of the greatest number is lost.
 *
 * Pure numbers; not locked.
 */
#ifndef UNDERTAG_WORKLIST_TOTALS_H
#define UNDERTAG_WORKLIST_TOTALS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "daemon/learner/worklist.h"

enum {
    TOTALS_BUCKETS = 4096,
    TOTALS_PARTS = 1 + TOTALS_BUCKETS / WORKLIST_PART_VALUES
};

/* Zero-initialised is empty. */
struct worklist_totals {
    uint64_t size;
    uint64_t turn;  /* the number of the stale entry that was handed out last */
    unsigned shift; /* a bucket is as wide as 2 to this power */
    uint64_t buckets[TOTALS_BUCKETS];
    uint8_t changed[TOTALS_PARTS];
    uint8_t sealed[TOTALS_PARTS];
};

void totals_add(struct worklist_totals *totals, uint64_t scored);

/* Whether an entry with such scores can have been counted. */
bool totals_may_hold(const struct worklist_totals *totals, uint64_t scored);

/* Takes one out again that totals_may_hold. */
void totals_take(struct worklist_totals *totals, uint64_t scored);

/* The greatest number, up to `scored`, below which the counts are exact. */
uint64_t totals_limit(const struct worklist_totals *totals, uint64_t scored);

/* The entries with scores from below that. */
uint64_t totals_below(const struct worklist_totals *totals, uint64_t scored);

void totals_set_turn(struct worklist_totals *totals, uint64_t number);

/* For the functions of worklist.h about parts. */
size_t totals_part_get(const struct worklist_totals *totals, size_t part,
                       double ret_values[WORKLIST_PART_VALUES]);
int totals_part_restore(struct worklist_totals *totals, size_t part, const double *values,
                        size_t count) __attribute__((warn_unused_result));
int totals_restored(struct worklist_totals *totals) __attribute__((warn_unused_result));
void totals_seal(struct worklist_totals *totals);
void totals_stored(struct worklist_totals *totals);
void totals_clean(struct worklist_totals *totals);

#endif
