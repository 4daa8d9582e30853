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
#include <string.h>

#include "daemon/learner/postings.h"
#include "daemon/learner/weights.h"

enum scratch_mark {
    SCRATCH_GIVEN = 1,
    SCRATCH_ACTIVE = 2 /* in any lane */
};

/* A tag that has a loss on the example, in one of the lanes. */
struct scratch_active {
    uint32_t tag;
    uint32_t tag_count; /* of a given one */
    uint32_t last_word; /* the word of its newest hit, when has_word */
    bool has_word;
    enum weights_lane lane;
    float sign; /* y */
    float slope;
    float bias_rate;
    double factor;
    double margin;
    double curvature; /* D so far */
    double alpha;
};

/* A cell that takes part in the step. */
struct scratch_hit {
    uint32_t place; /* of its chunk */
    uint32_t at;    /* of its number in the chunk */
    uint32_t slot;
    float direction; /* y·rate·x: the weight moves by α times this */
    uint64_t noise;
};

/* Postings that are in memory, to be added to the sums. */
struct scratch_run {
    const uint32_t *numbers;
    uint32_t count;
    float x; /* the feature's value by the step of a cell */
};

struct scratch_rivals {
    struct weights_rival *list;
    size_t count;
    size_t capacity;
};

struct weights_scratch {
    size_t tag_capacity;
    size_t lanes;      /* that were scored last */
    size_t lanes_room; /* that there is room for */
    float *sums;       /* by tag and lane: Σ w·x of a touched tag, otherwise SCRATCH_UNTOUCHED */
    uint32_t *touched; /* one more than tags, for the write that is not kept */
    size_t touched_count;
    bool has_spoken;
    struct scratch_rivals rivals[WEIGHTS_LANES];
    struct scratch_run *runs;
    size_t run_count;
    size_t run_capacity;
    struct postings_walk walk;
    uint32_t *slot; /* by tag and lane, while learning: 1 + place in `active`, or 0 */
    size_t slot_capacity;
    uint8_t *marks; /* by tag, while learning: scratch_mark bits */
    size_t mark_capacity;
    struct scratch_active *active;
    size_t active_count;
    size_t active_capacity;
    struct scratch_hit *hits;
    size_t hit_count;
    size_t hit_capacity;
    size_t created;              /* cells of the main lane that are new, of the word at hand */
    struct weights_feature *due; /* words whose postings have become many */
    size_t due_count;
    size_t due_capacity;
};

/* Makes room for scores, and forgets the lanes scored last; the scratch has been cleared. */
int scratch_reserve_tags(struct weights_scratch *scratch, size_t count, size_t lanes)
    __attribute__((warn_unused_result));

/* Makes room in `slot` and `marks` for what has been scored. */
int scratch_reserve_slots(struct weights_scratch *scratch) __attribute__((warn_unused_result));

/* Forgets the item scored last. */
void scratch_clear(struct weights_scratch *scratch);

/*
 * The sum of a tag that nothing has touched, in the first lane: minus zero. A sum never comes to
 * it: x is above 0, a cell's weight is a whole number, and what cancels out is plus zero.
 */
#define SCRATCH_UNTOUCHED (-0.0F)

static inline bool scratch_is_untouched(float sum)
{
    uint32_t bits = 0;
    memcpy(&bits, &sum, sizeof bits);
    return bits == 0x80000000U;
}

static inline void scratch_touch(struct weights_scratch *scratch, uint32_t tag)
{
    float *sum = &scratch->sums[tag * scratch->lanes];
    if (scratch_is_untouched(*sum)) {
        *sum = 0.0F;
        scratch->touched[scratch->touched_count++] = tag;
    }
}

/* Σ w·x; 0 for a tag that is not touched. */
static inline float scratch_sum(const struct weights_scratch *scratch, enum weights_lane lane,
                                uint32_t tag)
{
    return tag < scratch->tag_capacity && lane < scratch->lanes
               ? scratch->sums[tag * scratch->lanes + lane]
               : 0.0F;
}

/* Empties what only learning uses. */
void scratch_end_learning(struct weights_scratch *scratch, const struct weights_given *given,
                          size_t given_count);

#endif
