#include "daemon/learner/postings.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>

enum {
    POSTING_BYTES = sizeof(uint32_t) + 2 * sizeof(float)
};

static size_t chunks_of(size_t postings)
{
    return (postings + POSTINGS_CHUNK - 1) / POSTINGS_CHUNK;
}

static size_t block_bytes(size_t capacity)
{
    return capacity * POSTING_BYTES + chunks_of(capacity);
}

void postings_deinit(struct postings *postings)
{
    free(postings->tags);
    memset(postings, 0, sizeof *postings);
}

uint64_t postings_bytes(const struct postings *postings)
{
    return block_bytes(postings->capacity);
}

/* Where the arrays lie in a block of the given capacity. */
static struct postings lay_out(void *block, uint32_t count, uint32_t capacity)
{
    struct postings laid = {.count = count, .capacity = capacity, .tags = block};
    laid.values = (void *)(laid.tags + capacity);
    laid.accumulators = laid.values + capacity;
    laid.changed = (uint8_t *)(laid.accumulators + capacity);
    return laid;
}

static int enlarge(struct postings *postings)
{
    if (postings->capacity > UINT32_MAX / 2) {
        return -ENOMEM;
    }
    uint32_t capacity = postings->capacity + postings->capacity / 2 + 4;
    void *block = calloc(1, block_bytes(capacity));
    if (!block) {
        return -ENOMEM;
    }
    struct postings larger = lay_out(block, postings->count, capacity);
    if (postings->count > 0) {
        memcpy(larger.tags, postings->tags, postings->count * sizeof *larger.tags);
        memcpy(larger.values, postings->values, postings->count * sizeof *larger.values);
        memcpy(larger.accumulators, postings->accumulators,
               postings->count * sizeof *larger.accumulators);
        memcpy(larger.changed, postings->changed, chunks_of(postings->count));
    }
    void *old = postings->tags;
    *postings = larger;
    free(old);
    return 0;
}

int postings_append(struct postings *postings, uint32_t tag, float value, float accumulator)
{
    if (postings->count == postings->capacity && enlarge(postings) < 0) {
        return -ENOMEM;
    }
    uint32_t at = postings->count++;
    /* The arrays are those of the larger block; the analyzer sees the smaller one's in them. */
    // NOLINTNEXTLINE(clang-analyzer-unix.Malloc)
    postings->tags[at] = tag;
    postings->values[at] = value;
    postings->accumulators[at] = accumulator;
    postings->changed[at / POSTINGS_CHUNK] = 1;
    return 0;
}
