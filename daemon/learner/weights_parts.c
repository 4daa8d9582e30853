/* What of the weights has changed, to be stored, and how it is put back. */
#include <errno.h>
#include <string.h>

#include "daemon/grow.h"
#include "daemon/learner/weights.h"
#include "daemon/learner/weights_private.h"

int weights_changed_chunks(const struct weights *weights,
                           int (*each)(void *user, const struct weights_chunk *chunk), void *user)
{
    for (size_t i = 0; i < weights->changed_words.count; i++) {
        uint32_t word = weights->changed_words.list[i];
        const struct postings *postings = &weights->words[word];
        uint32_t chunks = postings_chunks(postings);
        for (uint32_t c = 0; c < chunks; c++) {
            if (!postings->changed[c]) {
                continue;
            }
            uint32_t first = c * POSTINGS_CHUNK;
            uint32_t left = postings->count - first;
            struct weights_chunk chunk = {.word = word,
                                          .number = c,
                                          .count = left < POSTINGS_CHUNK ? left : POSTINGS_CHUNK,
                                          .tags = postings->tags + first,
                                          .values = postings->values + first,
                                          .accumulators = postings->accumulators + first};
            int result = each(user, &chunk);
            if (result != 0) {
                return result;
            }
        }
    }
    return 0;
}

struct weights_bias weights_bias(const struct weights *weights, uint32_t tag)
{
    return tag < weights->tag_count ? weights->biases[tag].bias : (struct weights_bias){0};
}

const struct marks *weights_changed_tags(const struct weights *weights)
{
    return &weights->changed_tags;
}

int weights_mark_tag(struct weights *weights, uint32_t tag)
{
    return marks_add(&weights->changed_tags, tag);
}

void weights_clean(struct weights *weights)
{
    for (size_t i = 0; i < weights->changed_words.count; i++) {
        struct postings *postings = &weights->words[weights->changed_words.list[i]];
        if (postings->count > 0) {
            memset(postings->changed, 0, postings_chunks(postings));
        }
    }
    marks_clear(&weights->changed_words);
    marks_clear(&weights->changed_tags);
}

int weights_restore_chunk(struct weights *weights, const struct weights_chunk *chunk)
{
    if (GROW(&weights->words, &weights->word_capacity, (size_t)chunk->word + 1) < 0) {
        return -ENOMEM;
    }
    struct postings *postings = &weights->words[chunk->word];
    if (chunk->count > POSTINGS_CHUNK ||
        postings->count != (uint64_t)chunk->number * POSTINGS_CHUNK) {
        return -EINVAL;
    }
    uint64_t bytes_before = postings_bytes(postings);
    for (uint32_t j = 0; j < chunk->count; j++) {
        if (weights_reserve_tags(weights, (size_t)chunk->tags[j] + 1) < 0 ||
            postings_append(postings, chunk->tags[j], chunk->values[j], chunk->accumulators[j]) <
                0) {
            return -ENOMEM;
        }
    }
    if (chunk->count > 0) {
        postings->changed[chunk->number] = 0;
    }
    weights->posting_count += chunk->count;
    weights->posting_bytes += postings_bytes(postings) - bytes_before;
    return 0;
}

int weights_restore_bias(struct weights *weights, uint32_t tag, struct weights_bias bias)
{
    if (weights_reserve_tags(weights, (size_t)tag + 1) < 0) {
        return -ENOMEM;
    }
    weights->biases[tag].bias = bias;
    weights_refresh_raised(weights, tag);
    return 0;
}
