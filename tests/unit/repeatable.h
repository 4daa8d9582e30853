/*
 * repeatable: random numbers that are the same in every run, by the generator of Steele, Lea and
 * Flood (2014).
 */
#ifndef UNDERTAG_TESTS_REPEATABLE_H
#define UNDERTAG_TESTS_REPEATABLE_H

#include <stdint.h>

struct repeatable {
    uint64_t state; /* the seed, to begin with */
};

static inline uint64_t repeatable_next(struct repeatable *random)
{
    uint64_t mixed = (random->state += 0x9e3779b97f4a7c15U);
    mixed = (mixed ^ (mixed >> 30U)) * 0xbf58476d1ce4e5b9U;
    mixed = (mixed ^ (mixed >> 27U)) * 0x94d049bb133111ebU;
    return mixed ^ (mixed >> 31U);
}

/* From [0, 1). */
static inline double repeatable_share(struct repeatable *random)
{
    return (double)(repeatable_next(random) >> 11U) * 0x1p-53;
}

/* One of 0 .. count - 1. */
static inline uint32_t repeatable_below(struct repeatable *random, uint32_t count)
{
    return (uint32_t)(repeatable_next(random) % count);
}

#endif
