/*
 * The propensity curve of Jain, Prabhu and Varma (KDD 2016) by hand, the chance that an ungiven tag
 * is missing by counting out the four cases, and the effective number of Cui et al. (CVPR 2019).
 */
#include "daemon/learner/propensity.h"

#include "tests/unit/near.h"

static double by_default_curve(double tag_count, double documents)
{
    struct propensity_curve curve = propensity_curve_default();
    return propensity_of_curve(&curve, tag_count, documents);
}

/* --- the curve ----------------------------------------------------------------------------------
 */

/* ln 1000 - 1 = 5.907755; C = 5.907755·2.5^.55 = 9.778889; (10 + 1.5)^-.55 = .260985;
 * p = 1/(1 + 2.552147). */
static void a_tag_on_ten_of_a_thousand_items_by_hand(void **state)
{
    (void)state;
    assert_near(by_default_curve(10.0, 1000.0), 0.281520, 1e-6);
}

/* A tag that keeps its share of one in a thousand: at N_l = 1 both powers cancel and
 * p = 1/ln 1000; at N_l = 76 of 76,000 (2.5/77.5)^.55 = .151269, p = 1/(1 + 10.238489·.151269). */
static void the_propensity_of_a_steady_tag_grows_with_the_store(void **state)
{
    (void)state;
    assert_near(by_default_curve(1.0, 1000.0), 0.144765, 1e-6);
    assert_near(by_default_curve(76.0, 76000.0), 0.392346, 1e-6);
}

/* The two other published parameter pairs (from memory), at N_l = 10, N = 1000:
 * 5.907755·(1.4/10.4)^.5 = 2.167554 and 5.907755·(3.6/12.6)^.6 = 2.786004. */
static void other_parameters_by_hand(void **state)
{
    (void)state;
    const struct propensity_curve flat = {0.5, 0.4};
    const struct propensity_curve steep = {0.6, 2.6};
    assert_near(propensity_of_curve(&flat, 10.0, 1000.0), 1.0 / 3.167554, 1e-6);
    assert_near(propensity_of_curve(&steep, 10.0, 1000.0), 1.0 / 3.786004, 1e-6);
}

/* Where ln N - 1 is below 1 (N < e² = 7.39) it counts as 1: p = 1/(1 + (2.5/(N_l + 1.5))^.55). */
static void a_store_of_next_to_no_items_counts_as_one_of_seven(void **state)
{
    (void)state;
    for (int documents = 0; documents <= 7; documents++) {
        assert_near(by_default_curve(1.0, documents), 0.5, 1e-12);
        assert_near(by_default_curve(0.0, documents), 0.430220, 1e-6);
    }
    assert_true(by_default_curve(1.0, 8.0) < 0.5);
}

/* B = 0 and a tag never used: the odds against are infinite. */
static void a_propensity_is_never_below_one_hundredth(void **state)
{
    (void)state;
    const struct propensity_curve no_offset = {0.55, 0.0};
    const struct propensity_curve negative_offset = {0.55, -0.5};
    const struct propensity_curve power_of_nine = {9.0, 1.5};
    assert_near(propensity_of_curve(&no_offset, 0.0, 1000.0), 0.01, 0.0);
    assert_near(propensity_of_curve(&negative_offset, 0.0, 1000.0), 0.01, 0.0);
    assert_near(propensity_of_curve(&power_of_nine, 0.0, 1e9), 0.01, 0.0);
}

static void a_propensity_is_never_above_one(void **state)
{
    (void)state;
    assert_near(by_default_curve(1e300, 10.0), 1.0, 1e-12);
    assert_true(by_default_curve(1e300, 10.0) <= 1.0);
}

static void a_tag_used_more_is_given_more_surely(void **state)
{
    (void)state;
    double last = 0.0;
    for (int tag_count = 0; tag_count < 1000; tag_count++) {
        double propensity = by_default_curve(tag_count, 5000.0);
        assert_true(propensity > last);
        last = propensity;
    }
}

static void the_same_use_in_a_larger_store_is_less_sure(void **state)
{
    (void)state;
    double last = 1.0;
    for (int documents = 10; documents < 100000; documents *= 2) {
        double propensity = by_default_curve(5.0, documents);
        assert_true(propensity < last);
        last = propensity;
    }
}

/* --- missing, given that it was not given -------------------------------------------------------
 */

/* The cases of y* and y: belongs and given pq, belongs and not given (1 - p)q, neither 1 - q. */
static void the_chance_that_a_tag_is_missing_is_bayes_rule(void **state)
{
    (void)state;
    for (int p_tenths = 0; p_tenths <= 10; p_tenths++) {
        for (int q_tenths = 0; q_tenths <= 9; q_tenths++) {
            double p = p_tenths / 10.0;
            double q = q_tenths / 10.0;
            double belongs_not_given = (1.0 - p) * q;
            double neither = 1.0 - q;
            assert_near(propensity_missing_chance(p, q),
                        belongs_not_given / (belongs_not_given + neither), 1e-12);
        }
    }
}

/* q = .6, p = .5: .5·.6/(1 - .3) = .3/.7. */
static void an_editor_s_silence_halves_the_odds_of_a_tag_given_half_the_time(void **state)
{
    (void)state;
    assert_near(propensity_missing_chance(0.5, 0.6), 0.428571, 1e-6);
}

static void what_is_always_given_is_never_missing(void **state)
{
    (void)state;
    assert_near(propensity_missing_chance(1.0, 0.7), 0.0, 0.0);
    assert_near(propensity_missing_chance(1.0, 1.0), 0.0, 0.0); /* a contradiction */
}

static void what_surely_belongs_and_may_be_forgotten_is_missing(void **state)
{
    (void)state;
    assert_near(propensity_missing_chance(0.9, 1.0), 1.0, 1e-12);
}

/* --- balance ------------------------------------------------------------------------------------
 */

/* The effective number is 1 + β + β² + … + β^(n-1). */
static void the_balance_factor_is_one_over_the_effective_number(void **state)
{
    (void)state;
    double effective = 0.0;
    double power = 1.0;
    for (int n = 1; n <= 40; n++) {
        effective += power;
        power *= 0.9;
        assert_near(propensity_balance_factor(0.9, n), 1.0 / effective, 1e-12);
    }
}

static void a_balance_of_zero_changes_nothing(void **state)
{
    (void)state;
    assert_near(propensity_balance_factor(0.0, 1.0), 1.0, 0.0);
    assert_near(propensity_balance_factor(0.0, 5000.0), 1.0, 0.0);
}

static void a_tag_never_used_is_balanced_as_one_used_once(void **state)
{
    (void)state;
    assert_near(propensity_balance_factor(0.999, 0.0), 1.0, 1e-12);
    assert_near(propensity_balance_factor(0.999, 1.0), 1.0, 1e-12);
}

static void a_tag_used_for_ever_is_balanced_by_one_less_beta(void **state)
{
    (void)state;
    assert_near(propensity_balance_factor(0.999, 1e9), 0.001, 1e-12);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_tag_on_ten_of_a_thousand_items_by_hand),
        cmocka_unit_test(the_propensity_of_a_steady_tag_grows_with_the_store),
        cmocka_unit_test(other_parameters_by_hand),
        cmocka_unit_test(a_store_of_next_to_no_items_counts_as_one_of_seven),
        cmocka_unit_test(a_propensity_is_never_below_one_hundredth),
        cmocka_unit_test(a_propensity_is_never_above_one),
        cmocka_unit_test(a_tag_used_more_is_given_more_surely),
        cmocka_unit_test(the_same_use_in_a_larger_store_is_less_sure),
        cmocka_unit_test(the_chance_that_a_tag_is_missing_is_bayes_rule),
        cmocka_unit_test(an_editor_s_silence_halves_the_odds_of_a_tag_given_half_the_time),
        cmocka_unit_test(what_is_always_given_is_never_missing),
        cmocka_unit_test(what_surely_belongs_and_may_be_forgotten_is_missing),
        cmocka_unit_test(the_balance_factor_is_one_over_the_effective_number),
        cmocka_unit_test(a_balance_of_zero_changes_nothing),
        cmocka_unit_test(a_tag_never_used_is_balanced_as_one_used_once),
        cmocka_unit_test(a_tag_used_for_ever_is_balanced_by_one_less_beta),
    };
    return cmocka_run_group_tests_name("propensity", tests, NULL, NULL);
}
