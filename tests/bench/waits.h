/*
 * waits: how long calls took, in seconds, to be told by their ranks.
 */
#ifndef UNDERTAG_BENCH_WAITS_H
#define UNDERTAG_BENCH_WAITS_H

#include <assert.h>
#include <stdio.h>
#include <stdlib.h>

#include "daemon/grow.h"

/* Zero-initialised is none; waits_deinit frees. */
struct waits {
    double *seconds;
    size_t count;
    size_t capacity;
};

static inline void waits_deinit(struct waits *waits)
{
    free(waits->seconds);
    *waits = (struct waits){0};
}

/* 0, or -1 without memory. */
static inline int waits_add(struct waits *waits, double seconds)
{
    if (GROW(&waits->seconds, &waits->capacity, waits->count + 1) < 0) {
        return -1;
    }
    waits->seconds[waits->count++] = seconds;
    return 0;
}

static inline int waits_compare(const void *left, const void *right)
{
    double a = *(const double *)left;
    double b = *(const double *)right;
    return (a > b) - (a < b);
}

/* Sorts them, and prints the members of a JSON object; there is at least one. */
static inline void waits_print(struct waits *waits)
{
    assert(waits->count > 0);
    qsort(waits->seconds, waits->count, sizeof *waits->seconds, waits_compare);
    printf("\"calls\": %zu, \"p50_s\": %.9f, \"p99_s\": %.9f, \"most_s\": %.9f", waits->count,
           waits->seconds[waits->count / 2], waits->seconds[waits->count * 99 / 100],
           waits->seconds[waits->count - 1]);
}

#endif
