/*
 * The least propensities: what the evidence says against a curve that believes tags are given
 * seldom. Wilson's lower limit (Wilson 1927; NIST/SEMATECH e-Handbook 7.2.4.1), worked by hand with
 * the file's z = 2.3: of n pairs all given it is n/(n + 5.29).
 */
#include "tests/unit/calibrators_fixture.h"

static const double Z_SQUARED = 5.29;

static double all_given(double pairs)
{
    return pairs / (pairs + Z_SQUARED);
}

static double least_of(const struct calibrators *calibrators, size_t tag_class)
{
    double least[CALIBRATORS_CLASSES];
    calibrators_least(calibrators, least);
    return least[tag_class];
}

static double middle_of(int bin)
{
    return 0.02 * bin - 0.99;
}

/* --- the limit ----------------------------------------------------------------------------------
 */

/* 80 of 100: z²/n = .0529; (.8 + .02645 - 2.3·√(.16/100 + .0529/400))/1.0529
 * = (.82645 - 2.3·.0416203)/1.0529 = .694011. */
static void the_least_is_the_lower_limit_of_the_share_given(void **state)
{
    add(*state, SCORE, LOW, 100, 80);
    assert_near(least_of(*state, LOW), 0.694011, 1e-5);
}

static void of_pairs_all_given_the_limit_is_below_one(void **state)
{
    add(*state, SCORE, LOW, 100, 100);
    assert_near(least_of(*state, LOW), all_given(100.0), 1e-12); /* 100/105.29 = .9498 */
}

static void without_evidence_the_least_is_nothing(void **state)
{
    double least[CALIBRATORS_CLASSES];
    calibrators_least(*state, least);
    for (size_t c = 0; c < CALIBRATORS_CLASSES; c++) {
        assert_true(least[c] == 0.0);
    }
}

static void nineteen_pairs_say_nothing_and_twenty_do(void **state)
{
    add(*state, SCORE, LOW, 19, 19);
    assert_true(least_of(*state, LOW) == 0.0);
    add(*state, SCORE, LOW, 1, 1);
    assert_near(least_of(*state, LOW), all_given(20.0), 1e-12); /* 20/25.29 = .79 */
}

static void pairs_of_which_none_was_given_say_nothing(void **state)
{
    add(*state, SCORE, LOW, 1000, 0);
    assert_near(least_of(*state, LOW), 0.0, 1e-12);
}

/* 12 and 12 at scores apart: neither is enough, the 24 above the lower one are. */
static void the_pairs_above_a_score_are_taken_together(void **state)
{
    add(*state, middle_of(90), LOW, 12, 12);
    assert_true(least_of(*state, LOW) == 0.0);
    add(*state, middle_of(50), LOW, 12, 12);
    assert_near(least_of(*state, LOW), all_given(24.0), 1e-12);
}

/* The 1,000 pairs that do not belong lie below the 30 that do. */
static void pairs_of_lower_scores_do_not_take_back_what_the_higher_ones_say(void **state)
{
    add(*state, middle_of(90), LOW, 30, 30);
    add(*state, middle_of(20), LOW, 1000, 0);
    assert_near(least_of(*state, LOW), all_given(30.0), 1e-12);
}

/* 1,000 at the top, none given; then 30 that were: 30 of 1,030 above them: z²/n = .005136,
 * (.029126 + .002568 - 2.3·√(.02827771/1030 + .001284/1030))/1.005136 = .019273. */
static void pairs_of_higher_scores_do_count_against_the_lower_ones(void **state)
{
    add(*state, middle_of(90), LOW, 1000, 0);
    add(*state, middle_of(20), LOW, 30, 30);
    assert_near(least_of(*state, LOW), 0.019273, 1e-6);
}

static void the_first_and_the_last_bin_above_the_floor_count(void **state)
{
    add(*state, middle_of(1), LOW, 20, 20);
    add(*state, 3.0, LOWER, 20, 20);
    assert_near(least_of(*state, LOW), all_given(20.0), 1e-12);
    assert_near(least_of(*state, LOWER), all_given(20.0), 1e-12);
}

static void the_floor_says_nothing(void **state)
{
    add(*state, -1.0, LOW, 100, 100);
    calibrators_add_rest(*state, LOW, 100.0);
    assert_true(least_of(*state, LOW) == 0.0);
}

static void classes_are_told_apart(void **state)
{
    add(*state, SCORE, LOW, 100, 100);
    add(*state, SCORE, LOWER, 50, 50);
    add(*state, SCORE, CALIBRATORS_CLASSES - 1, 25, 25);
    assert_near(least_of(*state, LOW), all_given(100.0), 1e-12);
    assert_near(least_of(*state, LOWER), all_given(50.0), 1e-12);
    assert_near(least_of(*state, CALIBRATORS_CLASSES - 1), all_given(25.0), 1e-12);
    assert_true(least_of(*state, RARE) == 0.0);
}

/* Rounding, or a given pair taken off at another score, may leave more given than there are. */
static void more_given_than_there_are_count_as_all_of_them(void **state)
{
    struct calibrators *calibrators = *state;
    calibrators->bins[SCORE_BIN].cells[LOW] =
        (struct calibrators_cell){.pairs = 100.0, .given = 120.0};
    assert_near(least_of(calibrators, LOW), all_given(100.0), 1e-12);
}

/* --- what counts --------------------------------------------------------------------------------
 */

/* They were seen because somebody was asked: no word on what is given unasked. */
static void known_pairs_do_not_count(void **state)
{
    add_known(*state, SCORE, LOW, 1000, 1000);
    assert_true(least_of(*state, LOW) == 0.0);
    add(*state, SCORE, LOW, 100, 80);
    add_known(*state, SCORE, LOW, 1000, 0);
    assert_near(least_of(*state, LOW), 0.694011, 1e-5);
}

static void rulings_on_pairs_not_given_change_nothing(void **state)
{
    add(*state, SCORE, LOW, 100, 80);
    calibrators_add_ruled(*state, SCORE, LOW, 10.0, true);
    calibrators_add_ruled(*state, SCORE, LOW, 10.0, false);
    assert_near(least_of(*state, LOW), 0.694011, 1e-5);
}

/* 100 of 120 were given; 20 of them wrongly: 80 of 100 remain. */
static void pairs_given_wrongly_no_longer_count_once_they_are_taken_off(void **state)
{
    add(*state, SCORE, LOW, 120, 100);
    for (int i = 0; i < 20; i++) {
        calibrators_take_off(*state, SCORE, LOW, 1.0);
    }
    assert_near(least_of(*state, LOW), 0.694011, 1e-5);
}

/* 80 of 100 a half-life ago are 40 of 50: z²/n = .1058;
 * (.8 + .0529 - 2.3·√(.0032 + .000529))/1.1058 = (.8529 - .1404506)/1.1058 = .644285. */
static void older_evidence_counts_less(void **state)
{
    add(*state, SCORE, LOW, 100, 80);
    for (int i = 0; i < 10; i++) {
        calibrators_age(*state, 10.0);
    }
    assert_near(least_of(*state, LOW), 0.644285, 1e-5);
}

/* 100 pairs three half-lives ago are 12.5, fewer than 20. */
static void evidence_long_past_says_nothing(void **state)
{
    add(*state, SCORE, LOW, 100, 100);
    for (int i = 0; i < 30; i++) {
        calibrators_age(*state, 10.0);
    }
    assert_true(least_of(*state, LOW) == 0.0);
}

/* 2^40 is above the largest gain of 1e12. */
static void the_gain_starting_anew_changes_nothing(void **state)
{
    struct calibrators *calibrators = *state;
    for (int i = 0; i < 39; i++) {
        calibrators_age(calibrators, 1.0);
    }
    add(calibrators, SCORE, LOW, 200, 160);
    calibrators_age(calibrators, 1.0);
    assert_true(calibrators->gain == 1.0);
    assert_near(least_of(calibrators, LOW), 0.694011, 1e-5);
}

/* --- streams ------------------------------------------------------------------------------------
 */

/* Pairs at all scores above the floor, which belong with the chance (1 + s)/2, or all of them. */
static void add_stream(struct calibrators *calibrators, size_t tag_class, double p, bool all_belong,
                       int pairs, struct repeatable *random)
{
    for (int i = 0; i < pairs; i++) {
        double score = -0.97 + 2.0 * repeatable_share(random);
        bool belongs = repeatable_share(random) < (1.0 + score) / 2.0 || all_belong;
        bool given = repeatable_share(random) < p && belongs;
        calibrators_add_pair(calibrators, score, tag_class);
        if (given) {
            calibrators_add_given(calibrators, score, tag_class);
        }
    }
}

/* How often the least lies above the truth, and by how much at most. */
struct passed {
    double share;
    double most;
};

static struct passed pass(struct calibrators *calibrators, bool all_belong)
{
    enum {
        TIMES = 40
    };
    static const double propensities[] = {0.05, 0.15, 0.3, 0.5, 0.7, 0.9};
    const size_t kinds = sizeof propensities / sizeof propensities[0];
    struct repeatable random = {17};
    struct passed passed = {0.0, 0.0};
    for (int time = 0; time < TIMES; time++) {
        double least[CALIBRATORS_CLASSES];
        calibrators_init(calibrators);
        for (size_t c = 0; c < CALIBRATORS_CLASSES; c++) {
            add_stream(calibrators, c, propensities[c % kinds], all_belong, 1500, &random);
        }
        calibrators_least(calibrators, least);
        for (size_t c = 0; c < CALIBRATORS_CLASSES; c++) {
            double above = least[c] - propensities[c % kinds];
            passed.share += above > 0.0 ? 1.0 / (TIMES * CALIBRATORS_CLASSES) : 0.0;
            passed.most = fmax(passed.most, above);
        }
    }
    return passed;
}

static void where_some_do_not_belong_the_least_hardly_ever_passes_the_truth(void **state)
{
    struct passed passed = pass(*state, false);
    assert_true(passed.share < 0.1);
    assert_true(passed.most < 0.1);
}

/* The worst: every pair belongs, so that each score's share is the truth but for chance. */
static void where_all_belong_the_least_seldom_passes_the_truth_and_by_little(void **state)
{
    struct passed passed = pass(*state, true);
    assert_true(passed.share < 0.2);
    assert_true(passed.most < 0.15);
}

/* More evidence brings it close to the truth, from below. */
static void with_much_evidence_the_least_is_near_the_truth(void **state)
{
    struct repeatable random = {18};
    add_stream(*state, LOW, 0.4, true, 100000, &random);
    double least = least_of(*state, LOW);
    assert_near(least, 0.4, 0.01);
}

/* --- against the curve --------------------------------------------------------------------------
 */

/* A desk whose tags are complete, with a curve that believes it gives 15 of 100. */
static void complete_tags_raise_the_curve_s_fifteen_per_cent_above_sixty(void **state)
{
    struct repeatable random = {19};
    add_stream(*state, RARE, 1.0, false, 1500, &random);
    assert_true(least_of(*state, RARE) > 0.6);
}

/* Without it a score of 0 would be taken for sure: half given stand for .5/.15 of them. */
static void complete_tags_are_not_taken_for_what_hides_many_more(void **state)
{
    double believed[CALIBRATORS_CLASSES];
    double least[CALIBRATORS_CLASSES];
    struct calibrators_curves curves;
    struct repeatable random = {20};
    for (size_t c = 0; c < CALIBRATORS_CLASSES; c++) {
        believed[c] = 0.15;
    }
    add_stream(*state, RARE, 1.0, false, 40000, &random);
    calibrators_fit(*state, believed, NO_LEAST, &curves);
    assert_near(calibrators_chance(&curves, 0.15, 0.0), 1.0, 1e-9);
    calibrators_least(*state, least);
    calibrators_fit(*state, believed, least, &curves);
    assert_near(calibrators_chance(&curves, 0.15, 0.0), 0.5, 0.06);
}

/* .3 of the pairs given: .3/.4 belong by what is believed, .3/.6 where at least .6 are given. */
static void a_given_pair_counts_by_the_larger_of_the_two(void **state)
{
    struct calibrators *calibrators = *state;
    double propensities[CALIBRATORS_CLASSES];
    double least[CALIBRATORS_CLASSES] = {0.0};
    struct calibrators_curves curves;
    usual_propensities(propensities);
    calibrators->bins[SCORE_BIN].cells[LOW] =
        (struct calibrators_cell){.pairs = MANY, .given = 0.3 * MANY};
    least[LOW] = 0.2;
    calibrators_fit(calibrators, propensities, least, &curves);
    assert_near(calibrators_chance(&curves, 0.4, SCORE), 0.75, 1e-6);
    least[LOW] = 0.6;
    calibrators_fit(calibrators, propensities, least, &curves);
    assert_near(calibrators_chance(&curves, 0.4, SCORE), 0.5, 1e-6);
}

int main(void)
{
#define least_test(name) cmocka_unit_test_setup(name, set_up)
    const struct CMUnitTest tests[] = {
        least_test(the_least_is_the_lower_limit_of_the_share_given),
        least_test(of_pairs_all_given_the_limit_is_below_one),
        least_test(without_evidence_the_least_is_nothing),
        least_test(nineteen_pairs_say_nothing_and_twenty_do),
        least_test(pairs_of_which_none_was_given_say_nothing),
        least_test(the_pairs_above_a_score_are_taken_together),
        least_test(pairs_of_lower_scores_do_not_take_back_what_the_higher_ones_say),
        least_test(pairs_of_higher_scores_do_count_against_the_lower_ones),
        least_test(the_first_and_the_last_bin_above_the_floor_count),
        least_test(the_floor_says_nothing),
        least_test(classes_are_told_apart),
        least_test(more_given_than_there_are_count_as_all_of_them),
        least_test(known_pairs_do_not_count),
        least_test(rulings_on_pairs_not_given_change_nothing),
        least_test(pairs_given_wrongly_no_longer_count_once_they_are_taken_off),
        least_test(older_evidence_counts_less),
        least_test(evidence_long_past_says_nothing),
        least_test(the_gain_starting_anew_changes_nothing),
        least_test(where_some_do_not_belong_the_least_hardly_ever_passes_the_truth),
        least_test(where_all_belong_the_least_seldom_passes_the_truth_and_by_little),
        least_test(with_much_evidence_the_least_is_near_the_truth),
        least_test(complete_tags_raise_the_curve_s_fifteen_per_cent_above_sixty),
        least_test(complete_tags_are_not_taken_for_what_hides_many_more),
        least_test(a_given_pair_counts_by_the_larger_of_the_two),
    };
    return cmocka_run_group_tests_name("calibrators_least", tests, NULL, NULL);
}
