#include "storage/numbers.h"

#include <stdlib.h>

static int compare_numbers(const void *left, const void *right)
{
    uint32_t a = *(const uint32_t *)left;
    uint32_t b = *(const uint32_t *)right;
    return (a > b) - (a < b);
}

size_t numbers_sort_unique(uint32_t *list, size_t count)
{
    if (count == 0) {
        return 0;
    }
    qsort(list, count, sizeof *list, compare_numbers);
    size_t kept = 1;
    for (size_t i = 1; i < count; i++) {
        if (list[i] != list[kept - 1]) {
            list[kept++] = list[i];
        }
    }
    return kept;
}

bool numbers_hold(struct numbers numbers, uint32_t number)
{
    return numbers.count > 0 &&
           bsearch(&number, numbers.list, numbers.count, sizeof number, compare_numbers);
}

struct numbers numbers_unite(struct numbers left, struct numbers right, uint32_t *into)
{
    size_t made = 0;
    size_t i = 0;
    size_t j = 0;
    while (i < left.count || j < right.count) {
        bool takes_left = j == right.count || (i < left.count && left.list[i] <= right.list[j]);
        uint32_t number = takes_left ? left.list[i] : right.list[j];
        i += takes_left;
        j += j < right.count && right.list[j] == number;
        into[made++] = number;
    }
    return (struct numbers){.list = into, .count = made};
}

/* Of `left`, those that are, or are not, in `right`. */
static struct numbers filter(struct numbers left, struct numbers right, bool in_right,
                             uint32_t *into)
{
    size_t made = 0;
    for (size_t i = 0; i < left.count; i++) {
        if (numbers_hold(right, left.list[i]) == in_right) {
            into[made++] = left.list[i];
        }
    }
    return (struct numbers){.list = into, .count = made};
}

struct numbers numbers_without(struct numbers left, struct numbers right, uint32_t *into)
{
    return filter(left, right, false, into);
}

struct numbers numbers_common(struct numbers left, struct numbers right, uint32_t *into)
{
    return filter(left, right, true, into);
}
