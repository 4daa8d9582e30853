#include "daemon/learner/weights.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/grow.h"
#include "daemon/learner/cell.h"
#include "daemon/learner/weights_private.h"

int weights_new(const struct weights_settings *settings, struct weights **ret_weights)
{
    struct weights *made = calloc(1, sizeof *made);
    if (!made) {
        return -ENOMEM;
    }
    made->settings = *settings;
    made->lanes = settings->shadow ? WEIGHTS_LANES : 1;
    if (postings_new(made->lanes, &made->postings) < 0) {
        free(made);
        return -ENOMEM;
    }
    *ret_weights = made;
    return 0;
}

void weights_free(struct weights *weights)
{
    if (!weights) {
        return;
    }
    postings_free(weights->postings);
    free(weights->tags);
    free(weights->raised);
    free(weights->lifts);
    marks_deinit(&weights->changed_tags);
    marks_deinit(&weights->sealed_tags);
    free(weights);
}

int weights_reserve_tags(struct weights *weights, size_t count)
{
    if (count <= weights->tag_count) {
        return 0;
    }
    if (GROW(&weights->tags, &weights->tag_capacity, count) < 0 ||
        GROW(&weights->raised, &weights->raised_capacity, count) < 0 ||
        GROW(&weights->lifts, &weights->lift_capacity, count * weights->lanes) < 0) {
        return -ENOMEM;
    }
    for (size_t i = weights->tag_count * weights->lanes; i < count * weights->lanes; i++) {
        weights->lifts[i] = WEIGHTS_BASE_SCORE;
    }
    weights->tag_count = count;
    postings_limit_tags(weights->postings, count);
    return 0;
}

uint64_t weights_postings(const struct weights *weights)
{
    return weights->posting_count;
}

struct weights_pruned weights_pruned(const struct weights *weights)
{
    return weights->pruned;
}

uint64_t weights_tag_bytes(const struct weights *weights)
{
    return weights->tag_capacity * sizeof *weights->tags +
           weights->raised_capacity * sizeof *weights->raised +
           weights->lift_capacity * sizeof *weights->lifts + marks_bytes(&weights->changed_tags) +
           marks_bytes(&weights->sealed_tags);
}

uint64_t weights_bytes(const struct weights *weights)
{
    return sizeof *weights + postings_bytes(weights->postings) + weights_tag_bytes(weights);
}

void weights_refresh_raised(struct weights *weights, uint32_t tag)
{
    struct tag_entry *entry = &weights->tags[tag];
    bool is_raised = false;
    for (size_t lane = 0; lane < weights->lanes; lane++) {
        float lift = WEIGHTS_BASE_SCORE + entry->biases[lane].value;
        weights->lifts[tag * weights->lanes + lane] = lift;
        is_raised = is_raised || lift > WEIGHTS_FLOOR_SCORE;
    }
    if (is_raised && entry->raised_at == 0) {
        weights->raised[weights->raised_count++] = tag;
        entry->raised_at = (uint32_t)weights->raised_count;
    } else if (!is_raised && entry->raised_at != 0) {
        uint32_t last = weights->raised[--weights->raised_count];
        weights->raised[entry->raised_at - 1] = last;
        weights->tags[last].raised_at = entry->raised_at;
        entry->raised_at = 0;
    }
}

void weights_expect(const struct weights *weights, const struct weights_feature *x, size_t count)
{
    for (size_t i = 0; i < count; i++) {
        postings_expect_word(weights->postings, x[i].word);
    }
    for (size_t i = 0; i < count; i++) {
        postings_expect_chunks(weights->postings, x[i].word);
    }
}

int weights_admit(struct weights *weights, const struct base *base, const struct weights_feature *x,
                  size_t count)
{
    weights_expect(weights, x, count);
    int result = 0;
    for (size_t i = 0; i < count && result == 0; i++) {
        result = postings_admit(weights->postings, base, x[i].word);
    }
    return result;
}

int weights_forget_word(struct weights *weights, const struct base *base, uint32_t word)
{
    int result = postings_admit(weights->postings, base, word); /* to count them */
    if (result == 0) {
        weights->posting_count -= postings_drop(weights->postings, word);
    }
    return result;
}

void weights_trim(struct weights *weights, uint64_t bytes)
{
    uint64_t others = weights_bytes(weights) - postings_bytes(weights->postings);
    postings_trim(weights->postings, bytes > others ? bytes - others : 0);
}

/* --- storing ------------------------------------------------------------------------------------
 */

int weights_cut_chunks(const struct weights *weights,
                       int (*each)(void *user, const struct weights_chunk *chunk), void *user)
{
    size_t count = 0;
    const struct postings_cut *cuts = postings_cuts(weights->postings, &count);
    for (size_t i = 0; i < count; i++) {
        for (uint32_t number = cuts[i].from; number < cuts[i].until; number++) {
            const struct weights_chunk gone = {.word = cuts[i].word, .number = number};
            int result = each(user, &gone);
            if (result != 0) {
                return result;
            }
        }
    }
    return 0;
}

int weights_changed_chunks(const struct weights *weights,
                           int (*each)(void *user, const struct weights_chunk *chunk), void *user)
{
    uint32_t *places = NULL;
    size_t count = 0;
    int result = postings_changed(weights->postings, &places, &count);
    size_t posting_bytes = postings_stride(weights->postings) * sizeof(uint32_t);
    for (size_t i = 0; i < count && result == 0; i++) {
        const struct chunk *chunk = postings_at(weights->postings, places[i]);
        const struct weights_chunk told = {.word = chunk->word,
                                           .number = chunk->number,
                                           .bytes = {.data = (const unsigned char *)chunk->numbers,
                                                     .size = chunk->count * posting_bytes}};
        result = each(user, &told);
    }
    free(places);
    return result;
}

uint64_t weights_posting_bytes(const struct weights *weights)
{
    return postings_stride(weights->postings) * sizeof(uint32_t);
}

uint64_t weights_chunk_bytes(const struct weights *weights)
{
    return postings_chunk_bytes(weights->postings);
}

size_t weights_changed_count(const struct weights *weights)
{
    return postings_changed_count(weights->postings);
}

struct weights_bias weights_bias(const struct weights *weights, enum weights_lane lane,
                                 uint32_t tag)
{
    return tag < weights->tag_count ? weights->tags[tag].biases[lane] : (struct weights_bias){0};
}

uint32_t weights_tag_count(const struct weights *weights, uint32_t tag)
{
    return tag < weights->tag_count ? weights->tags[tag].count : 0;
}

int weights_changed_tags(const struct weights *weights, int (*each)(void *user, uint32_t tag),
                         void *user)
{
    const struct marks *sealed = &weights->sealed_tags;
    const struct marks *changed = &weights->changed_tags;
    int result = 0;
    for (size_t i = 0; i < sealed->count && result == 0; i++) {
        result = each(user, sealed->list[i]);
    }
    for (size_t i = 0; i < changed->count && result == 0; i++) {
        result = marks_has(sealed, changed->list[i]) ? 0 : each(user, changed->list[i]);
    }
    return result;
}

size_t weights_changed_tag_count(const struct weights *weights)
{
    return weights->sealed_tags.count + weights->changed_tags.count;
}

int weights_mark_tag(struct weights *weights, uint32_t tag)
{
    return marks_add(&weights->changed_tags, tag);
}

int weights_seal(struct weights *weights)
{
    if (marks_join(&weights->sealed_tags, &weights->changed_tags) < 0 ||
        postings_seal(weights->postings) < 0) {
        return -ENOMEM;
    }
    marks_clear(&weights->changed_tags);
    return 0;
}

void weights_stored(struct weights *weights)
{
    postings_stored(weights->postings);
    marks_clear(&weights->sealed_tags);
}

void weights_clean(struct weights *weights)
{
    postings_clean(weights->postings);
    marks_clear(&weights->sealed_tags);
    marks_clear(&weights->changed_tags);
}

int weights_restore_bias(struct weights *weights, enum weights_lane lane, uint32_t tag,
                         struct weights_bias bias)
{
    if (weights_reserve_tags(weights, (size_t)tag + 1) < 0) {
        return -ENOMEM;
    }
    weights->tags[tag].biases[lane] = bias;
    weights_refresh_raised(weights, tag);
    return 0;
}

int weights_restore_count(struct weights *weights, uint32_t tag, uint32_t count)
{
    if (weights_reserve_tags(weights, (size_t)tag + 1) < 0) {
        return -ENOMEM;
    }
    weights->tags[tag].count = count;
    return 0;
}

void weights_restore_postings(struct weights *weights, uint64_t postings,
                              struct weights_pruned pruned)
{
    weights->posting_count = postings;
    weights->pruned = pruned;
}

/* --- for those who copy them --------------------------------------------------------------------
 */

_Static_assert((int)WEIGHTS_CHUNK_PAIRS == (int)POSTINGS_CHUNK, "a chunk's postings have room");

int weights_read_chunk(const struct weights *weights, struct base_bytes chunk,
                       struct weights_pair ret_pairs[WEIGHTS_CHUNK_PAIRS])
{
    uint32_t numbers[POSTINGS_MOST_NUMBERS];
    size_t stride = postings_stride(weights->postings);
    if (!postings_are(weights->postings, chunk)) {
        return -EINVAL;
    }
    memcpy(numbers, chunk.data, chunk.size); /* aligned */
    int count = 0;
    for (size_t at = 0; at < chunk.size / sizeof numbers[0]; at += stride) {
        ret_pairs[count++] = (struct weights_pair){
            .tag = numbers[at], .weight = (float)cell_weight(numbers[at + 1]) * CELL_STEP};
    }
    return count;
}
