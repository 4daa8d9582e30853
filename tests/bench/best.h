/*
 * best: the few best of many scores, by falling score, then by rising tag number.
 */
#ifndef UNDERTAG_BENCH_BEST_H
#define UNDERTAG_BENCH_BEST_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum {
    BEST_MOST = 32
};

struct best {
    size_t most; /* at most BEST_MOST */
    size_t count;
    uint32_t tags[BEST_MOST];
    float scores[BEST_MOST];
};

static inline bool best_is_before(float score, uint32_t tag, float other_score, uint32_t other_tag)
{
    return score > other_score || (score >= other_score && tag < other_tag);
}

static inline void best_offer(struct best *best, uint32_t tag, float score)
{
    if (best->count == best->most &&
        !best_is_before(score, tag, best->scores[best->most - 1], best->tags[best->most - 1])) {
        return;
    }
    size_t at = best->count < best->most ? best->count++ : best->most - 1;
    for (; at > 0 && best_is_before(score, tag, best->scores[at - 1], best->tags[at - 1]); at--) {
        best->scores[at] = best->scores[at - 1];
        best->tags[at] = best->tags[at - 1];
    }
    best->scores[at] = score;
    best->tags[at] = tag;
}

/* The tags alone, `none` behind the last. */
static inline void best_list(const struct best *best, uint32_t none, uint32_t *ret_tags)
{
    for (size_t i = 0; i < best->most; i++) {
        ret_tags[i] = i < best->count ? best->tags[i] : none;
    }
}

#endif
