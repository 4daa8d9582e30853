/*
 * learner_kind: what every learner under comparison does, so that one program measures them all.
 * Each is one adapter: weights_learner.c (undertag's own) and plain_learner.c (the baseline).
 */
#ifndef UNDERTAG_BENCH_LEARNER_KIND_H
#define UNDERTAG_BENCH_LEARNER_KIND_H

#include <stddef.h>
#include <stdint.h>

#include "daemon/learner/weights.h"

/* An item to learn; all borrowed. */
struct example {
    uint64_t number; /* no two examples have the same */
    const struct weights_feature *x;
    size_t count;
    const struct weights_given *given; /* no tag twice */
    size_t given_count;
    double step; /* η */
    double cost; /* C, of an example that is rehearsed: its weights shrink before; otherwise 0 */
};

struct learner {
    void *self;
    /* Scores x, then learns from it. Returns 0 or -ENOMEM. */
    int (*learn)(void *self, const struct example *example);
    /* The `most` best tags of x, best first, NO_TAG where there are no more. 0 or -ENOMEM. */
    int (*rank)(void *self, const struct weights_feature *x, size_t count, uint32_t *ret_tags,
                size_t most);
    uint64_t (*postings)(const void *self);
    void (*free)(void *self);
};

#define NO_TAG UINT32_MAX

/* Below 0: as the daemon has it without any configuration. */
#define DEFAULT_SPECIFICITY (-1.0)

/* Words and tags are numbers below these. 0 or -ENOMEM. */
int weights_learner_new(size_t tags, double specificity, struct learner *ret_learner)
    __attribute__((warn_unused_result));
int plain_learner_new(size_t words, size_t tags, struct learner *ret_learner)
    __attribute__((warn_unused_result));

/* How many postings each word has; 0 or -ENOMEM. It takes the weights apart: only learner->free may
 * follow. */
int weights_learner_count(struct learner *learner, uint32_t *ret_postings, size_t words)
    __attribute__((warn_unused_result));

#endif
