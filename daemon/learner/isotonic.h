/*
 * isotonic: the rising step function nearest to weighted values (isotonic regression), by pooling
 * adjacent violators (Ayer et al. 1955). Pure.
 */
#ifndef UNDERTAG_ISOTONIC_H
#define UNDERTAG_ISOTONIC_H

#include <stddef.h>

/* One step of the function; workspace of isotonic_fit. */
struct isotonic_pool {
    double mean;
    double weight;
    size_t size;
};

/*
 * Replaces values[0..count) by the non-decreasing values that minimise Σ weight·(value - fit)².
 * Weights are above 0. `pools` is workspace for `count` pools.
 */
void isotonic_fit(double *values, const double *weights, struct isotonic_pool *pools, size_t count);

#endif
