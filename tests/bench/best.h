/*
 * best: the few best of many scores, by falling score, then by rising tag number.
 */
#ifndef UNDERTAG_BENCH_BEST_H
#define UNDERTAG_BENCH_BEST_H

#include <math.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum {
    BEST_MOST = 32
};

struct best {
    size_t most; /* at most BEST_MOST */
    size_t count;
    float least; /* what scores less is not among them: -INFINITY until there are `most` */
    uint32_t tags[BEST_MOST];
    float scores[BEST_MOST];
};

static inline bool best_is_before(float score, uint32_t tag, float other_score, uint32_t other_tag)
{
    return score > other_score || (score >= other_score && tag < other_tag);
}

static inline struct best best_of(size_t most)
{
    return (struct best){.most = most, .least = -INFINITY};
}

static inline void best_insert(struct best *best, uint32_t tag, float score)
{
    size_t last = best->most - 1;
    if (best->count == best->most &&
        !best_is_before(score, tag, best->scores[last], best->tags[last])) {
        return;
    }
    size_t at = best->count < best->most ? best->count++ : last;
    for (; at > 0 && best_is_before(score, tag, best->scores[at - 1], best->tags[at - 1]); at--) {
        best->scores[at] = best->scores[at - 1];
        best->tags[at] = best->tags[at - 1];
    }
    best->scores[at] = score;
    best->tags[at] = tag;
    if (best->count == best->most) {
        best->least = best->scores[last];
    }
}

/* One comparison for the many that are not among the best. */
static inline void best_offer(struct best *best, uint32_t tag, float score)
{
    if (score >= best->least) {
        best_insert(best, tag, score);
    }
}

/* The tags alone, `none` behind the last. */
static inline void best_list(const struct best *best, uint32_t none, uint32_t *ret_tags)
{
    for (size_t i = 0; i < best->most; i++) {
        ret_tags[i] = i < best->count ? best->tags[i] : none;
    }
}

#endif
