#include "daemon/learner/isotonic.h"

#include "tests/unit/near.h"

enum {
    MOST = 16
};

static void assert_fit(double *values, const double *weights, const double *expected, size_t count)
{
    struct isotonic_pool pools[MOST];
    isotonic_fit(values, weights, pools, count);
    for (size_t i = 0; i < count; i++) {
        assert_near(values[i], expected[i], 1e-12);
    }
}

static const double ONES[MOST] = {1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1};

static void what_rises_already_stays_as_it_is(void **state)
{
    (void)state;
    double values[] = {0.1, 0.2, 0.2, 0.7};
    assert_fit(values, ONES, (const double[]){0.1, 0.2, 0.2, 0.7}, 4);
}

static void a_fall_is_replaced_by_its_mean(void **state)
{
    (void)state;
    double values[] = {1.0, 3.0, 2.0, 4.0};
    assert_fit(values, ONES, (const double[]){1.0, 2.5, 2.5, 4.0}, 4);
}

/* (3·1 + 2·3)/4 = 2.25 */
static void the_mean_is_weighted(void **state)
{
    (void)state;
    double values[] = {1.0, 3.0, 2.0};
    assert_fit(values, (const double[]){1.0, 1.0, 3.0}, (const double[]){1.0, 2.25, 2.25}, 3);
}

/* 3 and 0 make 1.5, which is below 2: 2, 3, 0 make 5/3, which is above 1. */
static void a_late_low_value_pulls_down_pool_after_pool(void **state)
{
    (void)state;
    double values[] = {1.0, 2.0, 3.0, 0.0};
    assert_fit(values, ONES, (const double[]){1.0, 5.0 / 3.0, 5.0 / 3.0, 5.0 / 3.0}, 4);
}

static void what_only_falls_becomes_one_mean(void **state)
{
    (void)state;
    double values[] = {5.0, 3.0, 1.0};
    assert_fit(values, (const double[]){1.0, 1.0, 2.0}, (const double[]){2.5, 2.5, 2.5}, 3);
}

static void two_falls_apart_are_two_pools(void **state)
{
    (void)state;
    double values[] = {2.0, 1.0, 4.0, 3.0};
    assert_fit(values, ONES, (const double[]){1.5, 1.5, 3.5, 3.5}, 4);
}

static void one_value_is_its_own_fit(void **state)
{
    (void)state;
    double values[] = {0.4};
    assert_fit(values, (const double[]){3.0}, (const double[]){0.4}, 1);
}

static void nothing_is_fitted_to_nothing(void **state)
{
    (void)state;
    double untouched = 7.0;
    isotonic_fit(&untouched, ONES, NULL, 0);
    assert_near(untouched, 7.0, 0.0);
}

/* Pools of 1 hundredth and 99 hundredths of the weight: .99·.2 + .01·.9 = .207. */
static void a_light_value_hardly_moves_a_heavy_one(void **state)
{
    (void)state;
    double values[] = {0.9, 0.2};
    assert_fit(values, (const double[]){1.0, 99.0}, (const double[]){0.207, 0.207}, 2);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(what_rises_already_stays_as_it_is),
        cmocka_unit_test(a_fall_is_replaced_by_its_mean),
        cmocka_unit_test(the_mean_is_weighted),
        cmocka_unit_test(a_late_low_value_pulls_down_pool_after_pool),
        cmocka_unit_test(what_only_falls_becomes_one_mean),
        cmocka_unit_test(two_falls_apart_are_two_pools),
        cmocka_unit_test(one_value_is_its_own_fit),
        cmocka_unit_test(nothing_is_fitted_to_nothing),
        cmocka_unit_test(a_light_value_hardly_moves_a_heavy_one),
    };
    return cmocka_run_group_tests_name("isotonic", tests, NULL, NULL);
}
