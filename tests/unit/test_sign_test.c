/*
 * The sign test, worked by hand: of n pairs that differ, as many ways to split them as there are
 * subsets, 2^n.
 */
#include "daemon/learner/sign_test.h"

#include "tests/unit/near.h"

static void one_pair_that_differs_says_nothing(void **state)
{
    (void)state;
    assert_near(sign_test(1, 0), 1.0, 1e-15); /* 2·1/2 */
}

static void three_of_three_are_a_quarter(void **state)
{
    (void)state;
    assert_near(sign_test(3, 0), 0.25, 1e-15); /* 2·1/8 */
}

static void eight_of_ten_are_the_tail_of_fifty_six_ways(void **state)
{
    (void)state;
    assert_near(sign_test(8, 2), 2.0 * (45 + 10 + 1) / 1024,
                1e-14); /* C(10, 8), (10, 9), (10, 10) */
}

static void both_sides_count_alike(void **state)
{
    (void)state;
    assert_near(sign_test(2, 8), sign_test(8, 2), 0.0);
}

static void an_even_split_is_as_likely_as_can_be(void **state)
{
    (void)state;
    assert_near(sign_test(0, 0), 1.0, 0.0);
    assert_near(sign_test(7, 7), 1.0, 0.0);
    assert_near(sign_test(6, 5), 1.0, 1e-14); /* 2·1/2 */
}

static void a_long_one_sided_run_is_a_power_of_two(void **state)
{
    (void)state;
    assert_near(sign_test(60, 0), 0x1p-59, 0x1p-59 * 1e-11);
    assert_near(sign_test(5000, 0), 0.0, 0.0); /* below the least double */
}

/* De Moivre and Laplace, with half a pair for continuity: 2·(1 - Φ(z)) = erfc(z/√2), z = (|w - l|
 * - 1)/√n. */
static void of_very_many_pairs_it_is_the_normal_distribution_s(void **state)
{
    (void)state;
    double z = (501000.0 - 499000.0 - 1.0) / sqrt(1e6);
    assert_near(sign_test(501000, 499000), erfc(z / sqrt(2.0)), 1e-6);
    z = (100010000.0 - 99990000.0 - 1.0) / sqrt(2e8);
    assert_near(sign_test(100010000, 99990000), erfc(z / sqrt(2.0)), 1e-5);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(one_pair_that_differs_says_nothing),
        cmocka_unit_test(three_of_three_are_a_quarter),
        cmocka_unit_test(eight_of_ten_are_the_tail_of_fifty_six_ways),
        cmocka_unit_test(both_sides_count_alike),
        cmocka_unit_test(an_even_split_is_as_likely_as_can_be),
        cmocka_unit_test(a_long_one_sided_run_is_a_power_of_two),
        cmocka_unit_test(of_very_many_pairs_it_is_the_normal_distribution_s),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
