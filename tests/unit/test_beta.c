/*
 * The Beta distribution against scipy.stats (1.10: special.betainc and beta.ppf) and closed forms,
 * and the score interval against published examples.
 */
#include "daemon/learner/beta.h"

#include "tests/unit/near.h"

/* --- the distribution ---------------------------------------------------------------------------
 */

static void chances_are_those_of_scipy(void **state)
{
    (void)state;
    assert_near(beta_cdf(0.3, 2.0, 5.0), 0.5798250000000001, 1e-13);
    assert_near(beta_cdf(0.9, 0.5, 0.5), 0.7951672353008662, 1e-13);
    assert_near(beta_cdf(0.01, 0.2, 30.0), 0.8154678949764611, 1e-13);
    assert_near(beta_cdf(0.5, 1000.0, 900.0), 0.010861082630689614, 1e-11);
    assert_near(beta_cdf(0.089, 2.7, 27.5), 0.5669350625645341, 1e-13);
}

static void quantiles_are_those_of_scipy(void **state)
{
    (void)state;
    assert_near(beta_quantile(0.05, 2.0, 5.0), 0.06284989170835438, 1e-12);
    assert_near(beta_quantile(0.95, 2.0, 5.0), 0.5818034092520259, 1e-12);
    assert_near(beta_quantile(0.05, 0.5, 0.5), 0.0061558297024311365, 1e-12);
    assert_near(beta_quantile(0.95, 2.7, 27.5), 0.18638056649036824, 1e-12);
    assert_near(beta_quantile(0.5, 1000.0, 900.0), 0.5263250250244453, 1e-11);
    assert_near(beta_quantile(0.95, 50000.0, 3.0), 0.9999836466318419, 1e-11);
}

/* NIST/SEMATECH e-Handbook 7.2.4.1 (from memory): 4 defectives in 20, the exact 90 % limits are
 * .071354 and .401029; they are the quantiles of Beta(4, 17) and Beta(5, 16). */
static void exact_limits_of_a_proportion_are_those_of_the_handbook(void **state)
{
    (void)state;
    assert_near(beta_quantile(0.05, 4.0, 17.0), 0.071354, 5e-7);
    assert_near(beta_quantile(0.95, 5.0, 16.0), 0.401029, 1e-6);
}

/* Beta(1, b): P(X <= x) = 1 - (1 - x)^b; Beta(a, 1): x^a. */
static void closed_forms_hold(void **state)
{
    (void)state;
    assert_near(beta_cdf(0.2, 1.0, 3.0), 1.0 - 0.8 * 0.8 * 0.8, 1e-14);
    assert_near(beta_cdf(0.2, 4.0, 1.0), 0.2 * 0.2 * 0.2 * 0.2, 1e-14);
    assert_near(beta_quantile(0.0625, 4.0, 1.0), 0.5, 1e-12);
}

static void a_quantile_far_in_the_corner_is_found(void **state)
{
    (void)state;
    double x = beta_quantile(0.05, 0.1, 10.0);
    assert_near(x / 6.2073660613146995e-15, 1.0, 1e-6); /* scipy */
}

static void a_quantile_is_where_the_chance_is_reached(void **state)
{
    (void)state;
    const double shapes[] = {0.05, 0.3, 1.0, 2.5, 40.0, 3000.0, 2e5};
    const double chances[] = {0.05, 0.5, 0.95};
    size_t count = sizeof shapes / sizeof *shapes;
    for (size_t i = 0; i < count * count * 3; i++) {
        double a = shapes[i % count];
        double b = shapes[i / count % count];
        double chance = chances[i / (count * count)];
        double x = beta_quantile(chance, a, b);
        /* Close to 1 a double has no room: the chance may jump over the target there. */
        if (x < 1.0 - 1e-5 && x > 1e-280) {
            assert_near(beta_cdf(x, a, b), chance, 1e-8);
        }
    }
}

static void the_ends_are_certain(void **state)
{
    (void)state;
    assert_true(beta_cdf(0.0, 2.0, 3.0) == 0.0 && beta_cdf(-1.0, 2.0, 3.0) == 0.0);
    assert_true(beta_cdf(1.0, 2.0, 3.0) == 1.0 && beta_cdf(2.0, 2.0, 3.0) == 1.0);
    assert_true(beta_quantile(0.0, 2.0, 3.0) == 0.0 && beta_quantile(1.0, 2.0, 3.0) == 1.0);
}

/* Γ(5) = 24. */
static void the_logarithm_of_gamma_is_that_of_a_factorial(void **state)
{
    (void)state;
    assert_near(beta_log_gamma(5.0), log(24.0), 1e-14);
}

/* --- proportions --------------------------------------------------------------------------------
 */

/* Newcombe 1998, Statistics in Medicine 17, table I, the score method at 95 % (from memory):
 * 81/263 .2553 to .3662, 15/148 .0624 to .1605, 0/20 0 to .1611, 1/29 .0061 to .1718. */
static void score_intervals_are_the_published_ones(void **state)
{
    (void)state;
    const double rows[][4] = {{81.0, 263.0, 0.2553, 0.3662},
                              {15.0, 148.0, 0.0624, 0.1605},
                              {0.0, 20.0, 0.0, 0.1611},
                              {1.0, 29.0, 0.0061, 0.1718}};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        struct interval interval = proportion_interval_z(rows[i][0], rows[i][1], 1.959963984540054);
        assert_near(interval.low, rows[i][2], 6e-5);
        assert_near(interval.high, rows[i][3], 6e-5);
    }
}

/* Wilson's limits solve (share - p)² = z²p(1 - p)/n, here 4 of 20 and z = 1.6449. */
static void the_limits_are_those_where_the_score_test_turns(void **state)
{
    (void)state;
    struct interval interval = proportion_interval(4.0, 20.0);
    const double ends[] = {interval.low, interval.high};
    assert_true(interval.low < 0.2 && 0.2 < interval.high);
    for (size_t i = 0; i < 2; i++) {
        double p = ends[i];
        assert_near((0.2 - p) * (0.2 - p), INTERVAL_Z * INTERVAL_Z * p * (1.0 - p) / 20.0, 1e-14);
    }
}

static void without_trials_nothing_is_known(void **state)
{
    (void)state;
    struct interval interval = proportion_interval(0.0, 0.0);
    assert_true(interval.low == 0.0 && interval.high == 1.0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(chances_are_those_of_scipy),
        cmocka_unit_test(quantiles_are_those_of_scipy),
        cmocka_unit_test(exact_limits_of_a_proportion_are_those_of_the_handbook),
        cmocka_unit_test(closed_forms_hold),
        cmocka_unit_test(a_quantile_far_in_the_corner_is_found),
        cmocka_unit_test(a_quantile_is_where_the_chance_is_reached),
        cmocka_unit_test(the_ends_are_certain),
        cmocka_unit_test(the_logarithm_of_gamma_is_that_of_a_factorial),
        cmocka_unit_test(score_intervals_are_the_published_ones),
        cmocka_unit_test(the_limits_are_those_where_the_score_test_turns),
        cmocka_unit_test(without_trials_nothing_is_known),
    };
    return cmocka_run_group_tests_name("beta", tests, NULL, NULL);
}
