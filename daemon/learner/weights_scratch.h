/*
 * weights_scratch: what scoring and learning one item needs for a while. By tag, but cleared in the
 * time of what was touched, so that no item pays for the size of the vocabulary. Private to
 * weights.
 */
#ifndef UNDERTAG_WEIGHTS_SCRATCH_H
#define UNDERTAG_WEIGHTS_SCRATCH_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "daemon/learner/weights.h"

/* A tag that has a loss on the example. */
struct scratch_active {
    uint32_t tag;
    uint32_t last_word; /* the word of its newest hit, when has_word */
    bool has_word;
    float sign; /* y */
    float slope;
    float bias_rate;
    double factor;
    double margin;
    double curvature; /* D so far */
    double alpha;
};

/* A posting that takes part in the step. */
struct scratch_hit {
    uint32_t word;
    uint32_t at; /* place in the word's postings */
    uint32_t slot;
    float direction; /* y·rate·x: the weight moves by α times this */
};

struct weights_scratch {
    size_t tag_capacity;
    float *sums;         /* Σ w·x of a touched tag, otherwise 0 */
    uint8_t *is_touched; /* by tag */
    uint32_t *touched;   /* one more than tags, for the write that is not kept */
    size_t touched_count;
    uint8_t *is_given; /* by tag, while learning */
    uint32_t *slot;    /* by tag, while learning: 1 + place in `active`, or 0 */
    struct scratch_active *active;
    size_t active_count;
    size_t active_capacity;
    struct scratch_hit *hits;
    size_t hit_count;
    size_t hit_capacity;
};

int scratch_reserve_tags(struct weights_scratch *scratch, size_t count)
    __attribute__((warn_unused_result));

/* Forgets the item scored last. */
void scratch_clear(struct weights_scratch *scratch);

static inline void scratch_touch(struct weights_scratch *scratch, uint32_t tag)
{
    scratch->touched[scratch->touched_count] = tag;
    scratch->touched_count += !scratch->is_touched[tag];
    scratch->is_touched[tag] = 1;
}

/* Empties what only learning uses. */
void scratch_end_learning(struct weights_scratch *scratch, const struct weights_given *given,
                          size_t given_count);

#endif
