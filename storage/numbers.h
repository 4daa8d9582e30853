/*
 * numbers: sets of tag numbers, as rising lists without repetition. Pure.
 */
#ifndef UNDERTAG_NUMBERS_H
#define UNDERTAG_NUMBERS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* A rising list of numbers, none twice, that belongs to somebody else. */
struct numbers {
    const uint32_t *list;
    size_t count;
};

/* Sorts a list and drops what stands twice; returns its new length. */
size_t numbers_sort_unique(uint32_t *list, size_t count);

bool numbers_hold(struct numbers numbers, uint32_t number);

/* Each writes a new set to `into`, which overlaps no operand and has room for the largest result
 * (the sum of both, the first, the smaller one), and returns it. */
struct numbers numbers_unite(struct numbers left, struct numbers right, uint32_t *into);
struct numbers numbers_without(struct numbers left, struct numbers right, uint32_t *into);
struct numbers numbers_common(struct numbers left, struct numbers right, uint32_t *into);

#endif
