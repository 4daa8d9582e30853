/*
 * candidates: the few tags with the best scores, band by band (standing.h), so that what costs more
 * than a comparison is worked out for them alone.
 */
#ifndef UNDERTAG_CANDIDATES_H
#define UNDERTAG_CANDIDATES_H

#include <stddef.h>
#include <stdint.h>

enum {
    CANDIDATES_MOST = 24
};

/* By falling score; zero-initialised is empty. */
struct candidates {
    size_t count;
    uint32_t tags[CANDIDATES_MOST];
    float scores[CANDIDATES_MOST];
};

/* Puts a tag that is better than the last one into its place; equal scores stand by their tags, so
 * that the order in which tags come does not matter. */
void candidates_insert(struct candidates *candidates, uint32_t tag, float score);

/* The same; most tags are turned away by one comparison. */
static inline void candidates_add(struct candidates *candidates, uint32_t tag, float score)
{
    if (candidates->count < CANDIDATES_MOST || score >= candidates->scores[CANDIDATES_MOST - 1]) {
        candidates_insert(candidates, tag, score);
    }
}

#endif
