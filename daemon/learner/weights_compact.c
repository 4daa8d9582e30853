/*
 * Compaction: every now and then a word's postings are put in order, the heavy ones first, and
 * those that are not worth their place are left out. When that is due follows from the number of
 * postings alone, so that it comes at the same change however the daemon was restarted.
 */
#include <errno.h>
#include <stdlib.h>
#include <string.h>

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

static size_t count_main(const struct weights *weights, uint32_t word)
{
    size_t stride = postings_stride(weights->postings);
    const uint32_t *places = NULL;
    uint32_t chunks = postings_chunks(weights->postings, word, &places);
    size_t count = 0;
    for (uint32_t number = 0; number < chunks; number++) {
        const struct chunk *chunk = postings_at(weights->postings, places[number] - 1);
        for (size_t j = 0; j < chunk->count; j++) {
            count += chunk->numbers[j * stride + 1] != 0;
        }
    }
    return count;
}

bool weights_compaction_due(const struct weights *weights, uint32_t word, size_t created)
{
    if (created == 0 || postings_count(weights->postings, word) < FIRST_DUE) {
        return false;
    }
    size_t after = count_main(weights, word);
    size_t due = FIRST_DUE;
    while (due <= after - created) {
        due += due / GROWTH_PART;
    }
    return due <= after;
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

static uint32_t steps_of(uint32_t cell)
{
    return (uint32_t)abs(cell_weight(cell));
}

/* Empties the cells of a posting that are not worth their place, lane by lane, so that no lane
 * depends on another; what goes from the main lane is counted. Whether any cell is left. */
static bool prune(struct weights *weights, uint32_t document_count, uint32_t *posting,
                  size_t stride)
{
    double specificity = weights->settings.specificity;
    double tag_count = (double)weights->tags[posting[0]].count;
    bool is_unspecific =
        specificity > 0.0 && (double)document_count > PRUNING_MARGIN * specificity * tag_count;
    bool is_any_left = false;
    for (size_t i = 1; i < stride; i++) {
        bool is_tiny = steps_of(posting[i]) < LEAST_WEIGHT;
        if (i == 1 + WEIGHTS_MAIN && posting[i] != 0) {
            weights->pruned.unspecific += is_unspecific;
            weights->pruned.tiny += is_tiny && !is_unspecific;
        }
        posting[i] = is_unspecific || is_tiny ? 0 : posting[i];
        is_any_left = is_any_left || posting[i] != 0;
    }
    return is_any_left;
}

static void choose(struct compaction *compaction, const struct weights_feature *feature)
{
    struct weights *weights = compaction->weights;
    size_t stride = compaction->stride;
    const uint32_t *places = NULL;
    uint32_t chunks = postings_chunks(weights->postings, feature->word, &places);
    uint32_t at = 0;
    for (uint32_t number = 0; number < chunks; number++) {
        const struct chunk *chunk = postings_at(weights->postings, places[number] - 1);
        for (size_t j = 0; j < chunk->count; j++, at++) {
            uint32_t *posting = compaction->copy + at * stride;
            memcpy(posting, chunk->numbers + j * stride, stride * sizeof *posting);
            if (prune(weights, feature->document_count, posting, stride)) {
                uint64_t order = order_of(steps_of(posting[1 + WEIGHTS_MAIN]), posting[0]);
                compaction->kept[compaction->kept_count++] = (struct ordered){order, at};
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
        memcpy(compaction.sorted + k * stride, compaction.copy + compaction.kept[k].at * stride,
               stride * sizeof *compaction.copy);
    }
    weights->posting_count -= count - compaction.kept_count;
    int result = postings_replace(weights->postings, feature->word, compaction.sorted,
                                  compaction.kept_count);
    deinit(&compaction);
    return result;
}
