/*
 * Isotonic regression against its max-min formula and against scikit-learn.
 *
 * The formula (Robertson, Wright & Dykstra 1988, Order Restricted Statistical Inference; from
 * memory): fit_i = max over a <= i of min over b >= i of the weighted mean of values a … b.
 * It is slow, needs no pooling, and is written down here for itself.
 */
#include "daemon/learner/isotonic.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/near.h"
#include "tests/unit/repeatable.h"

enum {
    MOST = 40,
    TIMES = 500
};

static double mean(const double *values, const double *weights, size_t first, size_t last)
{
    double sum = 0.0;
    double weight = 0.0;
    for (size_t i = first; i <= last; i++) {
        sum += weights[i] * values[i];
        weight += weights[i];
    }
    return sum / weight;
}

static double max_min(const double *values, const double *weights, size_t count, size_t at)
{
    double greatest = -INFINITY;
    for (size_t first = 0; first <= at; first++) {
        double least = INFINITY;
        for (size_t last = at; last < count; last++) {
            least = fmin(least, mean(values, weights, first, last));
        }
        greatest = fmax(greatest, least);
    }
    return greatest;
}

static void check(const double *values, const double *weights, size_t count)
{
    double fitted[MOST];
    struct isotonic_pool pools[MOST];
    for (size_t i = 0; i < count; i++) {
        fitted[i] = values[i];
    }
    isotonic_fit(fitted, weights, pools, count);
    for (size_t i = 0; i < count; i++) {
        assert_near(fitted[i], max_min(values, weights, count, i), 1e-12);
    }
}

static void random_values_get_the_fit_of_the_formula(void **state)
{
    (void)state;
    struct repeatable random = {5};
    for (int time = 0; time < TIMES; time++) {
        double values[MOST];
        double weights[MOST];
        size_t count = 1 + repeatable_below(&random, MOST);
        double slope = 2.0 * repeatable_share(&random) - 1.0; /* rising, falling and neither */
        for (size_t i = 0; i < count; i++) {
            values[i] = slope * (double)i / MOST + repeatable_share(&random);
            weights[i] = 0.01 + 10.0 * repeatable_share(&random);
        }
        check(values, weights, count);
    }
}

/* Ties and plateaus: values from {0, 1/2, 1}, weights of 1. */
static void values_with_ties_get_the_fit_of_the_formula(void **state)
{
    (void)state;
    struct repeatable random = {6};
    for (int time = 0; time < TIMES; time++) {
        double values[MOST];
        double weights[MOST];
        for (size_t i = 0; i < MOST; i++) {
            values[i] = repeatable_below(&random, 3) / 2.0;
            weights[i] = 1.0;
        }
        check(values, weights, MOST);
    }
}

static void assert_fit(double *values, const double *weights, const double *expected, size_t count)
{
    struct isotonic_pool pools[MOST];
    isotonic_fit(values, weights, pools, count);
    for (size_t i = 0; i < count; i++) {
        assert_near(values[i], expected[i], 1e-11);
    }
}

/* scikit-learn 1.2.1:
 *   IsotonicRegression().fit_transform(range(10),
 *       [.10, .40, .20, .35, .05, .60, .55, .90, .70, .95],
 *       sample_weight=[8, 1, 3, 2, 5, 1, 4, 2, 2, 1]) */
static void the_fit_is_that_of_scikit_learn(void **state)
{
    (void)state;
    double values[] = {.10, .40, .20, .35, .05, .60, .55, .90, .70, .95};
    const double weights[] = {8, 1, 3, 2, 5, 1, 4, 2, 2, 1};
    const double expected[] = {
        0.1, 0.177272727273, 0.177272727273, 0.177272727273, 0.177272727273, 0.56, 0.56, 0.8, 0.8,
        0.95};
    assert_fit(values, weights, expected, 10);
}

/* scikit-learn 1.2.1:
 *   IsotonicRegression().fit_transform(range(10), [1, 2, 6, 2, 5, 8, 7, 7, 9, 3]) */
static void the_unweighted_fit_is_that_of_scikit_learn(void **state)
{
    (void)state;
    double values[] = {1, 2, 6, 2, 5, 8, 7, 7, 9, 3};
    const double weights[] = {1, 1, 1, 1, 1, 1, 1, 1, 1, 1};
    assert_fit(values, weights, (const double[]){1, 2, 4, 4, 5, 6.8, 6.8, 6.8, 6.8, 6.8}, 10);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(random_values_get_the_fit_of_the_formula),
        cmocka_unit_test(values_with_ties_get_the_fit_of_the_formula),
        cmocka_unit_test(the_fit_is_that_of_scikit_learn),
        cmocka_unit_test(the_unweighted_fit_is_that_of_scikit_learn),
    };
    return cmocka_run_group_tests_name("isotonic against the formula", tests, NULL, NULL);
}
