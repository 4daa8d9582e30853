/*
 * From scores to chances. Bins are .02 wide with their middles at -.97, -.95, … so that .51 is a
 * middle. By hand: a bin's chance is (Σ y/p + 10·prior)/(pairs + 10), and the prior at .51 is .803
 * (a straight line from .8 at .5 to .95 at 1), which gives 72 true of 90 pairs
 * (72 + 8.03)/100 = .8003; between the priors next to it, .794 and .809, it stays as it is.
 */
#include "daemon/learner/calibration.h"

#include <string.h>

#include "tests/unit/near.h"
#include "tests/unit/repeatable.h"

static const double SCORE = 0.51;

/* In exp2(.75) = 1.68 items a tag of the middle of class 1 (N/N_l from √2 to 2) has N_l = 1: there
 * the curve is 1/(1 + 1), whatever its parameters. */
enum {
    HALF_CLASS = 1
};
static const double HALF_DOCUMENTS = 1.681792830507429;

static int set_up(void **state)
{
    static struct calibration calibration;
    calibration_init(&calibration);
    *state = &calibration;
    return 0;
}

static void add(struct calibration *calibration, double score, int pairs, int given, size_t share)
{
    for (int i = 0; i < pairs; i++) {
        calibration_add_pair(calibration, score);
    }
    for (int i = 0; i < given; i++) {
        calibration_add_given(calibration, score, share);
    }
}

static void fit(const struct calibration *calibration, struct calibration_curve *ret_curve)
{
    struct propensity_curve curve = propensity_curve_default();
    calibration_fit(calibration, &curve, HALF_DOCUMENTS, ret_curve);
}

static double chance_at(const struct calibration *calibration, double score)
{
    struct calibration_curve curve;
    fit(calibration, &curve);
    return calibration_chance(&curve, score);
}

/* --- without evidence ---------------------------------------------------------------------------
 */

static void without_evidence_the_chances_are_the_prior_s(void **state)
{
    assert_near(chance_at(*state, -1.0), 0.0005, 1e-9);
    assert_near(chance_at(*state, -0.65), 0.055, 1e-9); /* half way from .01 to .10 */
    assert_near(chance_at(*state, 0.25), 0.65, 1e-9);   /* half way from .5 to .8 */
    assert_near(chance_at(*state, 1.31), 0.95, 1e-9);
}

static void without_evidence_it_is_early(void **state)
{
    struct calibration_curve curve;
    fit(*state, &curve);
    assert_true(curve.early);
}

/* --- the chance of a bin ------------------------------------------------------------------------
 */

static void an_examined_pair_that_was_given_is_one_true_one(void **state)
{
    add(*state, SCORE, 90, 72, CALIBRATION_EXAMINED);
    assert_near(chance_at(*state, SCORE), 0.8003, 1e-9);
}

/* Horvitz & Thompson 1952: 36 given with p = .5 stand for 72 true ones. */
static void a_pair_given_half_the_time_stands_for_two(void **state)
{
    add(*state, SCORE, 90, 36, HALF_CLASS);
    assert_near(chance_at(*state, SCORE), 0.8003, 1e-9);
}

static void evidence_of_both_kinds_adds_up(void **state)
{
    add(*state, SCORE, 45, 18, HALF_CLASS);
    add(*state, SCORE, 45, 36, CALIBRATION_EXAMINED);
    assert_near(chance_at(*state, SCORE), 0.8003, 1e-9);
}

/* The evidence is raw: the same counts, in a store where tags of that share are given more surely,
 * stand for fewer true ones. */
static void the_propensity_is_that_of_today(void **state)
{
    struct propensity_curve curve = propensity_curve_default();
    struct calibration_curve now;
    struct calibration_curve later;
    add(*state, SCORE, 9000, 4500, HALF_CLASS);
    calibration_fit(*state, &curve, 10.0, &now);
    calibration_fit(*state, &curve, 1000.0, &later);
    double share = exp2(-0.75);
    double p_now = propensity_of_curve(&curve, share * 10.0, 10.0);
    double p_later = propensity_of_curve(&curve, share * 1000.0, 1000.0);
    assert_true(p_later > p_now + 0.1);
    assert_near(calibration_chance(&now, SCORE), 0.5 / p_now, 0.01);
    assert_near(calibration_chance(&later, SCORE), 0.5 / p_later, 0.01);
}

static void a_chance_is_never_above_one(void **state)
{
    add(*state, SCORE, 1000, 1000, HALF_CLASS); /* stand for 2000 of 1000 */
    struct calibration_curve curve;
    fit(*state, &curve);
    for (size_t b = 0; b < CALIBRATION_BINS; b++) {
        assert_true(curve.chance[b] >= 0.0 && curve.chance[b] <= 1.0);
    }
    assert_near(calibration_chance(&curve, 1.0), 1.0, 1e-12);
}

/* Chance makes one bin 1.4 and the next .4; together they are .9, as many as there are. Cutting the
 * first to 1 beforehand would lose true pairs: .7. */
static void a_bin_that_came_out_above_one_is_pooled_before_it_is_cut(void **state)
{
    add(*state, SCORE, 9000, 6300, HALF_CLASS);
    add(*state, SCORE + 0.02, 9000, 1800, HALF_CLASS);
    assert_near(chance_at(*state, SCORE), 0.9, 2e-3);
    assert_near(chance_at(*state, SCORE + 0.02), 0.9, 2e-3);
}

/* 990 pairs, none given: (0 + 10·.0005)/1000. */
static void the_rest_at_the_floor_is_counted_in_one_go(void **state)
{
    calibration_add_rest(*state, 990.0);
    assert_near(chance_at(*state, -1.0), 5e-6, 1e-12);
    assert_near(chance_at(*state, -7.0), 5e-6, 1e-12);
}

static void the_rest_counts_in_full_however_old_the_evidence(void **state)
{
    calibration_age(*state, 0.1);
    calibration_add_rest(*state, 990.0);
    assert_near(chance_at(*state, -1.0), 5e-6, 1e-12);
}

static void a_pair_at_the_floor_score_is_one_of_the_rest(void **state)
{
    add(*state, CALIBRATION_FLOOR_SCORE, 990, 0, 0);
    assert_near(chance_at(*state, -1.0), 5e-6, 1e-12);
}

/* --- the curve ----------------------------------------------------------------------------------
 */

static void the_chance_rises_with_the_score_whatever_the_evidence(void **state)
{
    add(*state, -0.5, 500, 400, CALIBRATION_EXAMINED);
    add(*state, 0.3, 500, 20, CALIBRATION_EXAMINED);
    add(*state, 0.9, 500, 100, HALF_CLASS);
    struct calibration_curve curve;
    fit(*state, &curve);
    double last = 0.0;
    for (int i = -1100; i < 2000; i++) {
        double chance = calibration_chance(&curve, i / 1000.0);
        assert_true(chance >= last - 1e-15);
        last = chance;
    }
}

static void between_two_middles_the_chance_is_on_a_straight_line(void **state)
{
    struct calibration_curve curve;
    fit(*state, &curve);
    double low = calibration_chance(&curve, 0.51);
    double high = calibration_chance(&curve, 0.53);
    assert_true(high > low);
    assert_near(calibration_chance(&curve, 0.515), 0.75 * low + 0.25 * high, 1e-12);
    assert_near(calibration_chance(&curve, 0.525), 0.25 * low + 0.75 * high, 1e-12);
}

/* What holds at the floor holds for pairs that share next to nothing with the item. */
static void just_above_the_floor_the_floor_has_no_part_in_the_chance(void **state)
{
    struct calibration_curve curve;
    fit(*state, &curve);
    assert_true(curve.chance[1] > curve.chance[0]);
    assert_near(calibration_chance(&curve, CALIBRATION_FLOOR_SCORE + 1e-3), curve.chance[1], 0.0);
}

static void beyond_the_last_bin_the_chance_stays(void **state)
{
    struct calibration_curve curve;
    fit(*state, &curve);
    double last = curve.chance[CALIBRATION_BINS - 1];
    assert_near(calibration_chance(&curve, 1.6), last, 0.0);
    assert_near(calibration_chance(&curve, 1e9), last, 0.0);
}

static void what_is_no_score_is_taken_for_one_at_the_floor(void **state)
{
    struct calibration_curve curve;
    fit(*state, &curve);
    assert_near(calibration_chance(&curve, (double)NAN), curve.chance[0], 0.0);
}

static void two_hundred_given_above_the_floor_are_enough(void **state)
{
    struct calibration_curve curve;
    add(*state, SCORE, 500, 199, HALF_CLASS);
    add(*state, -1.0, 500, 400, HALF_CLASS); /* at the floor: they say nothing about scores */
    fit(*state, &curve);
    assert_true(curve.early);
    add(*state, SCORE, 0, 1, CALIBRATION_EXAMINED);
    fit(*state, &curve);
    assert_false(curve.early);
}

/* --- evidence fades -----------------------------------------------------------------------------
 */

static void after_a_half_life_evidence_weighs_half(void **state)
{
    add(*state, SCORE, 180, 144, CALIBRATION_EXAMINED);
    for (int i = 0; i < 500; i++) {
        calibration_age(*state, 500.0);
    }
    assert_near(chance_at(*state, SCORE), 0.8003, 1e-9); /* as 90 pairs, 72 given */
}

static void new_evidence_counts_in_full_beside_what_has_faded(void **state)
{
    add(*state, SCORE, 90, 72, CALIBRATION_EXAMINED);
    calibration_age(*state, 1.0);
    add(*state, SCORE, 45, 36, CALIBRATION_EXAMINED);
    assert_near(chance_at(*state, SCORE), 0.8003, 1e-9); /* 45 + 45 pairs, 36 + 36 given */
}

/* 2^40 is the first power beyond 1e12: the gain goes back to 1. */
static void a_great_gain_is_taken_back_and_nothing_else_changes(void **state)
{
    struct calibration *calibration = *state;
    for (int i = 0; i < 39; i++) {
        calibration_age(calibration, 1.0);
    }
    add(calibration, SCORE, 180, 144, CALIBRATION_EXAMINED);
    memset(calibration->changed, 0, sizeof calibration->changed);
    calibration_age(calibration, 1.0);
    assert_near(calibration->gain, 1.0, 0.0);
    assert_near(chance_at(calibration, SCORE), 0.8003, 1e-9);
    for (size_t b = 0; b < CALIBRATION_BINS; b++) {
        assert_int_equal(calibration->changed[b], 1);
    }
}

/* --- what has changed ---------------------------------------------------------------------------
 */

static void a_bin_is_marked_when_something_is_added_to_it(void **state)
{
    struct calibration *calibration = *state;
    memset(calibration->changed, 0, sizeof calibration->changed);
    calibration_add_pair(calibration, SCORE);
    assert_int_equal(calibration->changed[75], 1); /* (.51 + .98)/.02 = 74.5, and the floor's bin */
    calibration_add_given(calibration, 0.53, HALF_CLASS);
    assert_int_equal(calibration->changed[76], 1);
    calibration_add_rest(calibration, 3.0);
    assert_int_equal(calibration->changed[0], 1);
    size_t changed = 0;
    for (size_t b = 0; b < CALIBRATION_BINS; b++) {
        changed += calibration->changed[b];
    }
    assert_int_equal(changed, 3);
}

/* --- how common a tag is ------------------------------------------------------------------------
 */

static void shares_are_classed_by_half_octaves(void **state)
{
    (void)state;
    assert_int_equal(calibration_share_class(100.0, 100.0), 0);
    assert_int_equal(calibration_share_class(71.0, 100.0), 0); /* N/N_l = 1.408 < √2 */
    assert_int_equal(calibration_share_class(70.0, 100.0), 1); /* 1.429 */
    assert_int_equal(calibration_share_class(50.0, 100.0), 2);
    assert_int_equal(calibration_share_class(1.0, 1024.0), 20);
}

static void the_rarest_and_the_unused_share_the_last_class(void **state)
{
    (void)state;
    assert_int_equal(calibration_share_class(1.0, 1e9), CALIBRATION_SHARES - 1);
    assert_int_equal(calibration_share_class(0.0, 1e9), CALIBRATION_SHARES - 1);
    assert_int_equal(calibration_share_class(0.0, 0.0), CALIBRATION_SHARES - 1);
}

static void a_tag_counted_more_often_than_items_is_the_commonest(void **state)
{
    (void)state;
    assert_int_equal(calibration_share_class(5.0, 3.0), 0);
}

/* --- a known truth ------------------------------------------------------------------------------
 */

/* True chances q = (1 + s)/2, tags given with p = .5 where they belong: the curve finds q, and not
 * the half of it that is seen. */
static void a_known_truth_is_found_behind_missing_tags(void **state)
{
    enum {
        PAIRS = 200000
    };
    struct repeatable random = {20};
    for (int i = 0; i < PAIRS; i++) {
        double score = 2.0 * repeatable_share(&random) - 1.0;
        calibration_add_pair(*state, score);
        if (repeatable_share(&random) < (1.0 + score) / 2.0 && repeatable_share(&random) < 0.5) {
            calibration_add_given(*state, score, HALF_CLASS);
        }
    }
    struct calibration_curve curve;
    fit(*state, &curve);
    double error = 0.0;
    for (int i = -95; i <= 95; i++) {
        error += fabs(calibration_chance(&curve, i / 100.0) - (1.0 + i / 100.0) / 2.0) / 191.0;
    }
    assert_near(error, 0.0, 0.01);
    assert_false(curve.early);
}

/* With few pairs and q near 1, chance alone carries many bins' y/p above 1. The mean of the curve
 * is still q: what is too much in one bin makes up for what is too little in the next. */
static void chances_near_one_are_not_too_low_on_the_average(void **state)
{
    enum {
        TIMES = 200,
        FIRST_BIN = 80,
        LAST_BIN = 99,
        PAIRS = 60
    };
    struct repeatable random = {21};
    double sum = 0.0;
    for (int time = 0; time < TIMES; time++) {
        struct calibration_curve curve;
        calibration_init(*state);
        for (int bin = FIRST_BIN; bin <= LAST_BIN; bin++) {
            for (int i = 0; i < PAIRS; i++) {
                bool is_given = repeatable_share(&random) < 0.9 * 0.5;
                add(*state, 0.02 * bin - 0.99, 1, is_given ? 1 : 0, HALF_CLASS);
            }
        }
        fit(*state, &curve);
        for (int bin = FIRST_BIN; bin <= LAST_BIN; bin++) {
            sum += curve.chance[bin];
        }
    }
    assert_near(sum / (TIMES * (LAST_BIN - FIRST_BIN + 1)), 0.9, 0.004);
}

int main(void)
{
#define calibration_test(name) cmocka_unit_test_setup(name, set_up)
    const struct CMUnitTest tests[] = {
        calibration_test(without_evidence_the_chances_are_the_prior_s),
        calibration_test(without_evidence_it_is_early),
        calibration_test(an_examined_pair_that_was_given_is_one_true_one),
        calibration_test(a_pair_given_half_the_time_stands_for_two),
        calibration_test(evidence_of_both_kinds_adds_up),
        calibration_test(the_propensity_is_that_of_today),
        calibration_test(a_chance_is_never_above_one),
        calibration_test(a_bin_that_came_out_above_one_is_pooled_before_it_is_cut),
        calibration_test(the_rest_at_the_floor_is_counted_in_one_go),
        calibration_test(the_rest_counts_in_full_however_old_the_evidence),
        calibration_test(a_pair_at_the_floor_score_is_one_of_the_rest),
        calibration_test(the_chance_rises_with_the_score_whatever_the_evidence),
        calibration_test(between_two_middles_the_chance_is_on_a_straight_line),
        calibration_test(just_above_the_floor_the_floor_has_no_part_in_the_chance),
        calibration_test(beyond_the_last_bin_the_chance_stays),
        calibration_test(what_is_no_score_is_taken_for_one_at_the_floor),
        calibration_test(two_hundred_given_above_the_floor_are_enough),
        calibration_test(after_a_half_life_evidence_weighs_half),
        calibration_test(new_evidence_counts_in_full_beside_what_has_faded),
        calibration_test(a_great_gain_is_taken_back_and_nothing_else_changes),
        calibration_test(a_bin_is_marked_when_something_is_added_to_it),
        calibration_test(shares_are_classed_by_half_octaves),
        calibration_test(the_rarest_and_the_unused_share_the_last_class),
        calibration_test(a_tag_counted_more_often_than_items_is_the_commonest),
        calibration_test(a_known_truth_is_found_behind_missing_tags),
        calibration_test(chances_near_one_are_not_too_low_on_the_average),
    };
    return cmocka_run_group_tests_name("calibration", tests, NULL, NULL);
}
