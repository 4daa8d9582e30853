/*
 * postings: one word's (tag, weight, accumulator) triples, as three arrays side by side so that
 * scoring reads only tags and weights. Postings are only ever appended; their order is kept.
 */
#ifndef UNDERTAG_POSTINGS_H
#define UNDERTAG_POSTINGS_H

#include <stddef.h>
#include <stdint.h>

enum {
    POSTINGS_CHUNK = 160
}; /* postings to a stored chunk */

/* Zero-initialised is empty. Read freely; change by the functions below, or values in place. */
struct postings {
    uint32_t count;
    uint32_t capacity;
    uint32_t *tags; /* owns the block that all four arrays lie in */
    float *values;
    float *accumulators;
    uint8_t *changed; /* by chunk */
};

void postings_deinit(struct postings *postings);

/* Appends a posting and marks its chunk as changed. Returns 0 or -ENOMEM. */
int postings_append(struct postings *postings, uint32_t tag, float value, float accumulator)
    __attribute__((warn_unused_result));

/* Chunks that the postings take. */
static inline uint32_t postings_chunks(const struct postings *postings)
{
    return (postings->count + POSTINGS_CHUNK - 1) / POSTINGS_CHUNK;
}

/* Bytes of the block. */
uint64_t postings_bytes(const struct postings *postings);

#endif
