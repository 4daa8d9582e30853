/*
 * Compaction: every now and then a word's postings are put in order, the heavy ones first, and
 * those that are not worth their place are left out. When that is due follows from the number of
 * postings alone, so that it comes at the same change however the daemon was restarted.
 */
#include <errno.h>
#include <stdlib.h>

#include "daemon/grow.h"
#include "daemon/learner/cell.h"
#include "daemon/learner/weights.h"
#include "daemon/learner/weights_private.h"
#include "daemon/learner/weights_scratch.h"

/*
 * A weight that is there is left out only once its word is this many times too common for the tag.
 * Measured on W, one pass: with 1 the tail's found@10 falls from .358 to .354.
 */
static const double PRUNING_MARGIN = 4.0;

enum {
    FIRST_DUE = 2 * POSTINGS_CHUNK, /* postings: fewer are read as quickly in any order */
    GROWTH_PART = 4,                /* due again when there are a quarter more */
    LEAST_WEIGHT = 3                /* steps of a cell: .0015; less is next to nothing */
};

bool weights_compaction_due(size_t before, size_t after)
{
    size_t due = FIRST_DUE;
    while (due <= before) {
        due += due / GROWTH_PART;
    }
    return due <= after;
}

/* The heaviest of a posting's cells, in steps. */
static uint32_t impact(const uint32_t *posting, size_t stride)
{
    uint32_t most = 0;
    for (size_t i = 1; i < stride; i++) {
        uint32_t weight = (uint32_t)abs(cell_weight(posting[i]));
        most = weight > most ? weight : most;
    }
    return most;
}

/* Postings of like impact stay together: by powers of two, then by tag. */
static uint64_t order_of(uint32_t steps, uint32_t tag)
{
    uint32_t tier = steps == 0 ? 32U : (uint32_t)__builtin_clz(steps);
    return (uint64_t)tier << 32U | tag;
}

struct ordered {
    uint64_t order;
    uint32_t at; /* of the posting in the copy */
};

static int compare_ordered(const void *left, const void *right)
{
    uint64_t a = ((const struct ordered *)left)->order;
    uint64_t b = ((const struct ordered *)right)->order;
    return (a > b) - (a < b);
}

struct compaction {
    struct weights *weights;
    size_t stride;
    uint32_t *copy; /* the word's postings as they were */
    struct ordered *kept;
    size_t kept_count;
    uint32_t *sorted;
};

static void deinit(struct compaction *compaction)
{
    free(compaction->copy);
    free(compaction->kept);
    free(compaction->sorted);
}

static int init(struct weights *weights, size_t count, struct compaction *ret_compaction)
{
    size_t stride = postings_stride(weights->postings);
    struct compaction made = {.weights = weights,
                              .stride = stride,
                              .copy = malloc(count * stride * sizeof *made.copy),
                              .kept = malloc(count * sizeof *made.kept),
                              .sorted = malloc(count * stride * sizeof *made.sorted)};
    if (!made.copy || !made.kept || !made.sorted) {
        deinit(&made);
        return -ENOMEM;
    }
    *ret_compaction = made;
    return 0;
}

/* Whether a posting stays; one that goes is counted. */
static bool is_worth_keeping(struct weights *weights, uint32_t document_count,
                             const uint32_t *posting, uint32_t steps)
{
    double specificity = weights->settings.specificity;
    double tag_count = (double)weights->tags[posting[0]].count;
    if (specificity > 0.0 && (double)document_count > PRUNING_MARGIN * specificity * tag_count) {
        weights->pruned.unspecific++;
        return false;
    }
    weights->pruned.tiny += steps < LEAST_WEIGHT;
    return steps >= LEAST_WEIGHT;
}

static void choose(struct compaction *compaction, const struct weights_feature *feature)
{
    struct weights *weights = compaction->weights;
    size_t stride = compaction->stride;
    uint32_t chunks = postings_chunks(weights->postings, feature->word);
    uint32_t at = 0;
    for (uint32_t number = 0; number < chunks; number++) {
        const struct chunk *chunk = postings_at(
            weights->postings, postings_place(weights->postings, feature->word, number));
        for (size_t j = 0; j < chunk->count; j++, at++) {
            const uint32_t *posting = chunk->numbers + j * stride;
            uint32_t steps = impact(posting, stride);
            for (size_t i = 0; i < stride; i++) {
                compaction->copy[at * stride + i] = posting[i];
            }
            if (is_worth_keeping(weights, feature->document_count, posting, steps)) {
                compaction->kept[compaction->kept_count++] =
                    (struct ordered){order_of(steps, posting[0]), at};
            }
        }
    }
}

int weights_compact(struct weights *weights, const struct weights_feature *feature)
{
    size_t count = postings_count(weights->postings, feature->word);
    struct compaction compaction;
    if (init(weights, count, &compaction) < 0) {
        return -ENOMEM;
    }
    choose(&compaction, feature);
    size_t stride = compaction.stride;
    if (compaction.kept_count > 1) {
        qsort(compaction.kept, compaction.kept_count, sizeof *compaction.kept, compare_ordered);
    }
    for (size_t k = 0; k < compaction.kept_count; k++) {
        const uint32_t *posting = compaction.copy + compaction.kept[k].at * stride;
        for (size_t i = 0; i < stride; i++) {
            compaction.sorted[k * stride + i] = posting[i];
        }
    }
    weights->posting_count -= count - compaction.kept_count;
    int result = postings_replace(weights->postings, feature->word, compaction.sorted,
                                  compaction.kept_count);
    deinit(&compaction);
    return result;
}
