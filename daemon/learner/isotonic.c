#include "daemon/learner/isotonic.h"

/* Joins the last pool to the one before it. */
static void join_last(struct isotonic_pool *pools, size_t count)
{
    struct isotonic_pool *into = &pools[count - 2];
    const struct isotonic_pool *from = &pools[count - 1];
    double weight = into->weight + from->weight;
    into->mean = (into->mean * into->weight + from->mean * from->weight) / weight;
    into->weight = weight;
    into->size += from->size;
}

void isotonic_fit(double *values, const double *weights, struct isotonic_pool *pools, size_t count)
{
    size_t pool_count = 0;
    for (size_t i = 0; i < count; i++) {
        pools[pool_count++] = (struct isotonic_pool){values[i], weights[i], 1};
        while (pool_count > 1 && pools[pool_count - 2].mean > pools[pool_count - 1].mean) {
            join_last(pools, pool_count);
            pool_count--;
        }
    }
    size_t next = 0;
    for (size_t i = 0; i < pool_count; i++) {
        for (size_t j = 0; j < pools[i].size; j++) {
            values[next++] = pools[i].mean;
        }
    }
}
