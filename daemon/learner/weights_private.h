/*
 * weights_private: the weights' own insides, for the files that are the weights together: weights
 * (life, storing), weights_score, weights_learn, weights_shrink and weights_compact.
 */
#ifndef UNDERTAG_WEIGHTS_PRIVATE_H
#define UNDERTAG_WEIGHTS_PRIVATE_H

#include <stddef.h>
#include <stdint.h>

#include "daemon/learner/marks.h"
#include "daemon/learner/postings.h"
#include "daemon/learner/weights.h"

struct tag_entry {
    struct weights_bias biases[WEIGHTS_LANES];
    uint32_t count;     /* items that had the tag when it was given last */
    uint32_t raised_at; /* 1 + place in `raised`, 0 when not there */
};

/*
 * `raised` lists the tags whose bias alone, in either lane, lifts them above the floor: an item
 * touches them even if it shares no word with them. Invariant: raised[tags[t].raised_at - 1] == t.
 */
struct weights {
    struct weights_settings settings;
    size_t lanes;
    struct postings *postings;
    uint64_t posting_count;
    struct weights_pruned pruned;
    struct tag_entry *tags;
    size_t tag_count;
    size_t tag_capacity;
    float *lifts; /* by tag and lane: WEIGHTS_BASE_SCORE and the bias, close together for scoring */
    size_t lift_capacity;
    uint32_t *raised;
    size_t raised_count;
    size_t raised_capacity;
    struct marks changed_tags;
    struct marks sealed_tags;
};

/* By tag, what is known lies anywhere: a walk over tags has the processor fetch it for the one so
 * many places ahead. Measured with half a million tags: a sixth of learning's time. */
enum {
    WEIGHTS_AHEAD = 16
};

/* How many of so many have one that far ahead. */
static inline size_t weights_fetching(size_t count)
{
    return count > WEIGHTS_AHEAD ? count - WEIGHTS_AHEAD : 0;
}

/* Has the processor fetch what leads to the words' chunks: for all of them one step, then the next,
 * so that no word waits for another's. */
void weights_expect(const struct weights *weights, const struct weights_feature *x, size_t count);

/* After a bias has changed: the tag's lifts, and whether it is on the list of raised ones. */
void weights_refresh_raised(struct weights *weights, uint32_t tag);

/* Whether a word's postings are to be compacted, now that so many weights of the main lane have
 * come. */
bool weights_compaction_due(const struct weights *weights, uint32_t word, size_t created);

/* Orders and prunes the postings of an admitted word. Returns 0 or -ENOMEM. */
int weights_compact(struct weights *weights, const struct weights_feature *feature)
    __attribute__((warn_unused_result));

#endif
