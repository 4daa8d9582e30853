#include "daemon/learner/best_gaps.h"

#include <stdlib.h>

/* Below 0: the left one is better. */
static int compare_gaps(const void *left, const void *right)
{
    const struct model_gap *a = left;
    const struct model_gap *b = right;
    if (a->chance != b->chance) {
        return a->chance > b->chance ? -1 : 1;
    }
    if (a->score != b->score) {
        return a->score > b->score ? -1 : 1;
    }
    return a->tag < b->tag ? -1 : a->tag > b->tag;
}

static void exchange(struct model_gap *one, struct model_gap *other)
{
    struct model_gap held = *one;
    *one = *other;
    *other = held;
}

static void rise(struct model_gap *heap, size_t at)
{
    while (at > 0 && compare_gaps(&heap[at], &heap[(at - 1) / 2]) > 0) {
        exchange(&heap[at], &heap[(at - 1) / 2]);
        at = (at - 1) / 2;
    }
}

static void sink(struct model_gap *heap, size_t count)
{
    for (size_t at = 0, worst = 1; worst < count; worst = 2 * at + 1) {
        if (worst + 1 < count && compare_gaps(&heap[worst + 1], &heap[worst]) > 0) {
            worst++;
        }
        if (compare_gaps(&heap[worst], &heap[at]) <= 0) {
            return;
        }
        exchange(&heap[worst], &heap[at]);
        at = worst;
    }
}

void best_gaps_put(struct model_gap *gaps, size_t *count, size_t most, const struct model_gap *gap)
{
    if (*count < most) {
        gaps[*count] = *gap;
        rise(gaps, (*count)++);
    } else if (most > 0 && compare_gaps(gap, &gaps[0]) < 0) {
        gaps[0] = *gap;
        sink(gaps, *count);
    }
}

void best_gaps_sort(struct model_gap *gaps, size_t count)
{
    if (count > 1) { /* with none there may be no array, which qsort does not allow */
        qsort(gaps, count, sizeof *gaps, compare_gaps);
    }
}
