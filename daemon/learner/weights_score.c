/* Scoring: from the words of an item to the tags that they touch. */
#include <errno.h>
#include <string.h>

#include "daemon/grow.h"
#include "daemon/learner/cell.h"
#include "daemon/learner/weights.h"
#include "daemon/learner/weights_private.h"
#include "daemon/learner/weights_scratch.h"

enum {
    NUMBERS_A_LINE = 64 / sizeof(uint32_t) /* of the processor's cache; common practice */
};

/* Adds a posting's part of the scores; `listed` is where the next touched tag is written, and so is
 * what it returns. */
static inline __attribute__((always_inline)) uint32_t *
add_posting(const uint32_t *posting, size_t lanes, float x, float *sums, uint32_t *listed)
{
    float *sum = sums + posting[0] * lanes;
    /* Without a branch: written always, kept when it is the first visit. */
    *listed = posting[0];
    listed += scratch_is_untouched(*sum);
    for (size_t lane = 0; lane < lanes; lane++) {
        sum[lane] += (float)cell_weight(posting[1 + lane]) * x;
    }
    return listed;
}

/* Adds a chunk's part of the scores. The numbers of lanes are constants where this is called, so
 * that there is no loop over them; `x` is the feature's value by the step of a cell. */
static inline __attribute__((always_inline)) void add_postings(const uint32_t *numbers,
                                                               size_t count, size_t stride,
                                                               size_t lanes, float x,
                                                               struct weights_scratch *scratch)
{
    float *sums = scratch->sums;
    uint32_t *listed = scratch->touched + scratch->touched_count;
    size_t fetching = weights_fetching(count);
    for (size_t j = 0; j < fetching; j++) {
        __builtin_prefetch(sums + numbers[(j + WEIGHTS_AHEAD) * stride] * lanes, 1);
        listed = add_posting(numbers + j * stride, lanes, x, sums, listed);
    }
    for (size_t j = fetching; j < count; j++) {
        listed = add_posting(numbers + j * stride, lanes, x, sums, listed);
    }
    scratch->touched_count = (size_t)(listed - scratch->touched);
}

static void add_chunk(const uint32_t *numbers, size_t count, size_t stride, float x,
                      struct weights_scratch *scratch)
{
    if (scratch->lanes == WEIGHTS_LANES) {
        add_postings(numbers, count, 1 + WEIGHTS_LANES, WEIGHTS_LANES, x, scratch);
    } else if (stride == 2) {
        add_postings(numbers, count, 2, 1, x, scratch);
    } else {
        add_postings(numbers, count, 1 + WEIGHTS_LANES, 1, x, scratch);
    }
}

/* Adds what was noted, in its order. */
static void add_runs(struct weights_scratch *scratch, size_t stride)
{
    for (size_t i = 0; i < scratch->run_count; i++) {
        const struct scratch_run *run = &scratch->runs[i];
        add_chunk(run->numbers, run->count, stride, run->x, scratch);
    }
    scratch->run_count = 0;
}

/* Notes a chunk that is in memory, and has the processor fetch it while others are noted. */
static int note_run(struct weights_scratch *scratch, const uint32_t *numbers, size_t count,
                    size_t stride, float x)
{
    if (GROW(&scratch->runs, &scratch->run_capacity, scratch->run_count + 1) < 0) {
        return -ENOMEM;
    }
    for (size_t i = 0; i < count * stride; i += NUMBERS_A_LINE) {
        __builtin_prefetch(numbers + i);
    }
    scratch->runs[scratch->run_count++] =
        (struct scratch_run){.numbers = numbers, .count = (uint32_t)count, .x = x};
    return 0;
}

/* Notes a word's chunks; what had to be read is added at once, since its bytes do not stay. */
static int note_word(const struct weights *weights, const struct base *base,
                     const struct weights_feature *feature, struct weights_scratch *scratch)
{
    size_t stride = postings_stride(weights->postings);
    float x = feature->value * CELL_STEP;
    struct postings_walk *walk = &scratch->walk;
    const uint32_t *numbers = NULL;
    size_t count = 0;
    int result = 0;
    postings_walk_begin(weights->postings, base, feature->word, walk);
    while ((result = postings_walk_next(walk, &numbers, &count)) == 0) {
        if (numbers == walk->buffer) {
            add_runs(scratch, stride); /* words are added in their order */
            add_chunk(numbers, count, stride, x, scratch);
        } else if (note_run(scratch, numbers, count, stride, x) < 0) {
            return -ENOMEM;
        }
    }
    return result == -ENOENT ? 0 : result;
}

/* Lists a tag in the lanes in which it is above the floor; `ends` are where each list goes on. */
static inline __attribute__((always_inline)) void list_rival(uint32_t tag, const float *lifts,
                                                             const float *sums, size_t lanes,
                                                             struct weights_rival **ends)
{
    for (size_t lane = 0; lane < lanes; lane++) {
        float score = lifts[lane] + sums[lane];
        /* Without a branch, as above. */
        *ends[lane] = (struct weights_rival){tag, score};
        ends[lane] += score > WEIGHTS_FLOOR_SCORE;
    }
}

/* Lists the touched tags that are above the floor, in one walk for all lanes: what is known of a
 * tag lies together. The numbers are constants where this is called. */
static inline __attribute__((always_inline)) void list_rivals(const struct weights *weights,
                                                              struct weights_scratch *scratch,
                                                              size_t lanes, size_t lifts_a_tag)
{
    const uint32_t *touched = scratch->touched;
    const float *sums = scratch->sums;
    const float *lifts = weights->lifts;
    struct weights_rival *ends[WEIGHTS_LANES];
    for (size_t lane = 0; lane < lanes; lane++) {
        ends[lane] = scratch->rivals[lane].list;
    }
    size_t fetching = weights_fetching(scratch->touched_count);
    for (size_t i = 0; i < fetching; i++) {
        uint32_t tag = touched[i];
        uint32_t ahead = touched[i + WEIGHTS_AHEAD];
        __builtin_prefetch(sums + ahead * lanes);
        __builtin_prefetch(lifts + ahead * lifts_a_tag);
        list_rival(tag, lifts + tag * lifts_a_tag, sums + tag * lanes, lanes, ends);
    }
    for (size_t i = fetching; i < scratch->touched_count; i++) {
        uint32_t tag = touched[i];
        list_rival(tag, lifts + tag * lifts_a_tag, sums + tag * lanes, lanes, ends);
    }
    for (size_t lane = 0; lane < lanes; lane++) {
        scratch->rivals[lane].count = (size_t)(ends[lane] - scratch->rivals[lane].list);
    }
}

static int find_rivals(const struct weights *weights, struct weights_scratch *scratch, size_t lanes)
{
    for (size_t lane = 0; lane < lanes; lane++) {
        struct scratch_rivals *rivals = &scratch->rivals[lane];
        if (GROW(&rivals->list, &rivals->capacity, scratch->touched_count + 1) < 0) {
            return -ENOMEM;
        }
    }
    if (lanes == WEIGHTS_LANES) {
        list_rivals(weights, scratch, WEIGHTS_LANES, WEIGHTS_LANES);
    } else if (weights->lanes == 1) {
        list_rivals(weights, scratch, 1, 1);
    } else {
        list_rivals(weights, scratch, 1, WEIGHTS_LANES);
    }
    return 0;
}

int weights_score(const struct weights *weights, const struct base *base,
                  const struct weights_feature *x, size_t count, size_t lanes,
                  struct weights_scratch *scratch)
{
    scratch_clear(scratch);
    if (scratch_reserve_tags(scratch, weights->tag_count, lanes) < 0) {
        return -ENOMEM;
    }
    scratch->run_count = 0;
    weights_expect(weights, x, count);
    for (size_t i = 0; i < count; i++) {
        int result = note_word(weights, base, &x[i], scratch);
        if (result < 0) {
            return result;
        }
    }
    add_runs(scratch, postings_stride(weights->postings));
    scratch->has_spoken = scratch->touched_count > 0;
    for (size_t i = 0; i < weights->raised_count; i++) {
        scratch_touch(scratch, weights->raised[i]);
    }
    return find_rivals(weights, scratch, lanes);
}

const struct weights_rival *weights_rivals(const struct weights_scratch *scratch,
                                           enum weights_lane lane, size_t *ret_count)
{
    *ret_count = scratch->rivals[lane].count;
    return scratch->rivals[lane].list;
}

bool weights_is_touched(const struct weights_scratch *scratch, uint32_t tag)
{
    return tag < scratch->tag_capacity &&
           !scratch_is_untouched(scratch->sums[tag * scratch->lanes]);
}

bool weights_speak(const struct weights_scratch *scratch)
{
    return scratch->has_spoken;
}

float weights_tag_score(const struct weights *weights, const struct weights_scratch *scratch,
                        enum weights_lane lane, uint32_t tag)
{
    float lift =
        tag < weights->tag_count ? weights->lifts[tag * weights->lanes + lane] : WEIGHTS_BASE_SCORE;
    return lift + scratch_sum(scratch, lane, tag);
}

/* --- explaining ---------------------------------------------------------------------------------
 */

static void explain_chunk(const uint32_t *numbers, size_t count, size_t stride, float x,
                          const struct weights_scratch *scratch, float *parts, size_t parts_a_tag)
{
    for (size_t j = 0; j < count; j++) {
        const uint32_t *posting = numbers + j * stride;
        uint32_t slot = scratch->slot[posting[0]];
        if (slot != 0) {
            parts[(slot - 1) * parts_a_tag] = (float)cell_weight(posting[1]) * x;
        }
    }
}

static int explain_word(const struct weights *weights, const struct base *base,
                        const struct weights_feature *feature, struct weights_scratch *scratch,
                        float *parts, size_t parts_a_tag)
{
    size_t stride = postings_stride(weights->postings);
    struct postings_walk *walk = &scratch->walk;
    const uint32_t *numbers = NULL;
    size_t count = 0;
    int result = 0;
    postings_walk_begin(weights->postings, base, feature->word, walk);
    while ((result = postings_walk_next(walk, &numbers, &count)) == 0) {
        explain_chunk(numbers, count, stride, feature->value * CELL_STEP, scratch, parts,
                      parts_a_tag);
    }
    return result == -ENOENT ? 0 : result;
}

int weights_explain(const struct weights *weights, const struct base *base,
                    const struct weights_feature *x, size_t count, const uint32_t *tags,
                    size_t tag_count, struct weights_scratch *scratch, float *parts)
{
    if (scratch_reserve_slots(scratch) < 0) {
        return -ENOMEM;
    }
    for (size_t k = 0; k < tag_count; k++) {
        scratch->slot[tags[k]] = (uint32_t)k + 1;
    }
    memset(parts, 0, tag_count * count * sizeof *parts);
    int result = 0;
    for (size_t i = 0; i < count && result == 0; i++) {
        result = explain_word(weights, base, &x[i], scratch, parts + i, count);
    }
    for (size_t k = 0; k < tag_count; k++) {
        scratch->slot[tags[k]] = 0;
    }
    return result;
}
