/*
 * best_gaps: the best of however many gaps, in an array with room for as many as are wanted: a heap
 * with the worst of them on top, until it is sorted.
 */
#ifndef UNDERTAG_BEST_GAPS_H
#define UNDERTAG_BEST_GAPS_H

#include <stddef.h>

#include "daemon/learner/model.h"

/* Puts a gap in, or in the place of the worst once there are `most`; one that is no better is
 * passed over. The array has room for one more than *count, or for `most`. */
void best_gaps_put(struct model_gap *gaps, size_t *count, size_t most, const struct model_gap *gap);

/* By falling chance, then score, then rising tag: the same order however they came. Nothing can be
 * put in any more. */
void best_gaps_sort(struct model_gap *gaps, size_t count);

#endif
