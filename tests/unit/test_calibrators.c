/*
 * From scores to chances: what is counted where, fades, and is stored; and how a curve is read.
 *
 * By hand: at -.25 the prior is .575 (half way from .35 at -.5 to .8 at 0). 52 true of 90 known
 * pairs make the pooled curve (52 + 3·.575)/93 = .577688, and their own group's
 * (52 + 15·.577688)/105 = .577765; between the priors next to it, .557 and .593, it stays there.
 */
#include "tests/unit/calibrators_fixture.h"

static const double POOLED = 0.577688172;
static const double OWN = 0.577764977;

/* --- without evidence ---------------------------------------------------------------------------
 */

static void without_evidence_every_group_has_the_prior(void **state)
{
    for (size_t c = 0; c <= RARE; c++) {
        assert_near(chance_at(*state, -1.0, c), 0.0005, 1e-9);
        assert_near(chance_at(*state, -0.65, c), 0.2, 1e-9); /* half way from .05 to .35 */
        assert_near(chance_at(*state, -0.25, c), 0.575, 1e-9);
        assert_near(chance_at(*state, 1.31, c), 0.97, 1e-9);
    }
}

static void without_evidence_it_is_early(void **state)
{
    struct calibrators_curves curves;
    fit(*state, &curves);
    assert_true(calibrators_early(&curves));
}

static void two_hundred_given_above_the_floor_over_all_groups_are_enough(void **state)
{
    struct calibrators_curves curves;
    add(*state, SCORE, HALF, 500, 100);
    add(*state, 0.5, RARE, 500, 99);
    add(*state, -1.0, HALF, 500, 400); /* at the floor: they say nothing about scores */
    add_known(*state, SCORE, HALF, 400, 400);
    fit(*state, &curves);
    assert_true(calibrators_early(&curves));
    add(*state, SCORE, SURE, 1, 1);
    fit(*state, &curves);
    assert_false(calibrators_early(&curves));
}

/* --- what is counted where ----------------------------------------------------------------------
 */

static void known_pairs_are_counted_as_they_are(void **state)
{
    add_known(*state, SCORE, SURE, 90, 52);
    assert_near(chance_at(*state, SCORE, SURE), OWN, 1e-9);
}

static void a_group_without_evidence_has_the_pooled_curve(void **state)
{
    add_known(*state, SCORE, SURE, 90, 52);
    assert_near(chance_at(*state, SCORE, RARE), POOLED, 1e-9);
}

static void pairs_surely_given_are_as_good_as_known(void **state)
{
    add(*state, SCORE, SURE, 90, 52);
    assert_near(chance_at(*state, SCORE, SURE), OWN, 1e-9);
}

/* 100 wrongly given ones in 190 pairs: 152 given, of which a check takes off the wrong ones. */
static void what_was_wrongly_given_becomes_known_not_to_belong(void **state)
{
    struct calibrators *calibrators = *state;
    add(calibrators, SCORE, HALF, 190, 152);
    for (int i = 0; i < 100; i++) {
        calibrators_take_off(calibrators, SCORE, HALF, 1.0);
    }
    const struct calibrators_cell *cell = &calibrators->bins[SCORE_BIN].cells[HALF];
    assert_near(cell->pairs, 90.0, 0.0);
    assert_near(cell->given, 52.0, 0.0);
    assert_near(cell->known, 100.0, 0.0);
    assert_near(cell->known_true, 0.0, 0.0);
}

static void no_more_is_taken_off_than_was_given(void **state)
{
    struct calibrators *calibrators = *state;
    add(calibrators, SCORE, HALF, 5, 1);
    calibrators_take_off(calibrators, SCORE, HALF, 0.25);
    calibrators_take_off(calibrators, SCORE, HALF, 1.0);
    calibrators_take_off(calibrators, SCORE, HALF, 1.0);
    const struct calibrators_cell *cell = &calibrators->bins[SCORE_BIN].cells[HALF];
    assert_near(cell->given, 0.0, 0.0);
    assert_near(cell->pairs, 4.0, 0.0);
    assert_near(cell->known, 1.0, 0.0);
}

/* Learning a given pair has raised its score since it was counted. */
static void a_wrong_pair_is_taken_off_below_its_score_of_today(void **state)
{
    struct calibrators *calibrators = *state;
    add(calibrators, SCORE, HALF, 5, 2);
    calibrators_take_off(calibrators, SCORE + 0.4, HALF, 1.0);
    const struct calibrators_cell *cell = &calibrators->bins[SCORE_BIN].cells[HALF];
    assert_near(cell->given, 1.0, 0.0);
    assert_near(cell->pairs, 4.0, 0.0);
    assert_near(cell->known, 1.0, 0.0);
}

static void a_ruling_counts_beside_the_pairs(void **state)
{
    struct calibrators *calibrators = *state;
    add(calibrators, SCORE, HALF, 5, 1);
    calibrators_add_ruled(calibrators, SCORE, HALF, 0.5, true);
    calibrators_add_ruled(calibrators, SCORE, HALF, 0.25, false);
    const struct calibrators_cell *cell = &calibrators->bins[SCORE_BIN].cells[HALF];
    assert_near(cell->pairs, 5.0, 0.0);
    assert_near(cell->ruled, 0.75, 0.0);
    assert_near(cell->ruled_true, 0.5, 0.0);
}

static void the_rest_at_the_floor_is_counted_in_one_go(void **state)
{
    struct calibrators *calibrators = *state;
    calibrators_age(calibrators, 1.0); /* a pair counts 2 now */
    calibrators_add_rest(calibrators, RARE, 985.0);
    calibrators_rule_rest(calibrators, RARE, 0.5, 100.0);
    const struct calibrators_cell *cell = &calibrators->bins[0].cells[RARE];
    assert_near(cell->pairs, 1970.0, 0.0);
    assert_near(cell->ruled, 100.0, 0.0);
    assert_near(cell->ruled_true, 0.0, 0.0);
}

/* 985 of p = 1, none given: pooled 3·.0005/988 = 1.518e-6; (0 + 15·1.518e-6)/1000. */
static void the_rest_lowers_the_chance_at_the_floor(void **state)
{
    calibrators_add_rest(*state, SURE, 985.0);
    assert_near(chance_at(*state, -1.0, SURE), 2.277e-8, 1e-11);
    assert_near(chance_at(*state, -7.0, SURE), 2.277e-8, 1e-11);
}

static void a_pair_at_the_floor_score_is_one_of_the_rest(void **state)
{
    add(*state, CALIBRATORS_FLOOR_SCORE, SURE, 985, 0);
    assert_near(chance_at(*state, -1.0, SURE), 2.277e-8, 1e-11);
}

static void a_bin_is_marked_whatever_is_added_to_it(void **state)
{
    struct calibrators *calibrators = *state;
    memset(calibrators->changed, 0, sizeof calibrators->changed);
    calibrators_add_pair(calibrators, -0.25, HALF);
    assert_int_equal(calibrators->changed[37], 1); /* (-.25 + .98)/.02 = 36.5, and the floor's */
    calibrators_add_given(calibrators, -0.23, HALF);
    assert_int_equal(calibrators->changed[38], 1);
    calibrators_add_known(calibrators, -0.21, HALF, true);
    assert_int_equal(calibrators->changed[39], 1);
    calibrators_add_ruled(calibrators, -0.19, HALF, 1.0, true);
    assert_int_equal(calibrators->changed[40], 1);
    calibrators_take_off(calibrators, -0.17, SURE, 1.0); /* none given: where it was looked for */
    assert_int_equal(calibrators->changed[41], 1);
    calibrators_add_rest(calibrators, HALF, 3.0);
    assert_int_equal(calibrators->changed[0], 1);
    size_t changed = 0;
    for (size_t b = 0; b < CALIBRATORS_BINS; b++) {
        changed += calibrators->changed[b];
    }
    assert_int_equal(changed, 6);
    calibrators->changed[0] = 0;
    calibrators_rule_rest(calibrators, HALF, 1.0, 3.0);
    assert_int_equal(calibrators->changed[0], 1);
}

/* --- how common a tag is ------------------------------------------------------------------------
 */

static void classes_are_octaves(void **state)
{
    (void)state;
    assert_int_equal(calibrators_class(100, 100), 0);
    assert_int_equal(calibrators_class(51, 100), 0); /* N/N_l = 1.96 */
    assert_int_equal(calibrators_class(50, 100), 1);
    assert_int_equal(calibrators_class(26, 100), 1); /* 3.85 */
    assert_int_equal(calibrators_class(25, 100), 2);
    assert_int_equal(calibrators_class(1, 1024), 10);
    assert_int_equal(calibrators_class(1, 1023), 9);
}

static void the_rarest_and_the_unused_share_the_last_class(void **state)
{
    (void)state;
    assert_int_equal(calibrators_class(1, (1U << 21U) - 1), CALIBRATORS_CLASSES - 2);
    assert_int_equal(calibrators_class(1, 1U << 21U), CALIBRATORS_CLASSES - 1);
    assert_int_equal(calibrators_class(1, UINT64_MAX), CALIBRATORS_CLASSES - 1);
    assert_int_equal(calibrators_class(0, 1000000000), CALIBRATORS_CLASSES - 1);
    assert_int_equal(calibrators_class(0, 0), CALIBRATORS_CLASSES - 1);
}

static void a_tag_counted_more_often_than_items_is_the_commonest(void **state)
{
    (void)state;
    assert_int_equal(calibrators_class(5, 3), 0);
    assert_int_equal(calibrators_class(UINT32_MAX, 0), 0);
}

static void the_middle_of_a_class_is_in_it(void **state)
{
    (void)state;
    for (size_t c = 0; c < CALIBRATORS_CLASSES; c++) {
        double share = calibrators_class_share(c);
        assert_int_equal(calibrators_class((uint32_t)lrint(share * 0x1p31), 1ULL << 31U), c);
    }
    assert_near(calibrators_class_share(3), 0.0883883476, 1e-9); /* 2^-3.5 */
}

static void groups_are_cut_at_their_lower_edge(void **state)
{
    (void)state;
    static const double edges[] = {0.3, 0.5, 0.7, 0.85};
    for (size_t i = 0; i < 4; i++) {
        assert_int_equal(calibrators_group(nextafter(edges[i], 0.0)), i);
        assert_int_equal(calibrators_group(edges[i]), i + 1);
    }
    assert_int_equal(calibrators_group(0.01), 0);
    assert_int_equal(calibrators_group(1.0), 4);
}

/* --- a curve read between its bins --------------------------------------------------------------
 */

static void between_two_middles_the_chance_is_on_a_straight_line(void **state)
{
    double low = chance_at(*state, 0.51, HALF);
    double high = chance_at(*state, 0.53, HALF);
    assert_true(high > low);
    assert_near(chance_at(*state, 0.515, HALF), 0.75 * low + 0.25 * high, 1e-12);
    assert_near(chance_at(*state, 0.525, HALF), 0.25 * low + 0.75 * high, 1e-12);
}

/* What holds at the floor holds for pairs that share next to nothing with the item. */
static void just_above_the_floor_the_floor_has_no_part_in_the_chance(void **state)
{
    struct calibrators_curves curves;
    fit(*state, &curves);
    const double *chance = curves.groups[2].chance;
    assert_true(chance[1] > chance[0]);
    assert_near(calibrators_chance(&curves, 0.5, CALIBRATORS_FLOOR_SCORE + 1e-3), chance[1], 0.0);
    assert_near(calibrators_chance(&curves, 0.5, CALIBRATORS_FLOOR_SCORE), chance[0], 0.0);
}

static void beyond_the_last_bin_the_chance_stays(void **state)
{
    struct calibrators_curves curves;
    fit(*state, &curves);
    double last = curves.groups[0].chance[CALIBRATORS_BINS - 1];
    assert_near(calibrators_chance(&curves, 0.1, 1.6), last, 0.0);
    assert_near(calibrators_chance(&curves, 0.1, 1e9), last, 0.0);
}

static void what_is_no_score_is_taken_for_one_at_the_floor(void **state)
{
    struct calibrators_curves curves;
    fit(*state, &curves);
    assert_near(calibrators_chance(&curves, 0.1, (double)NAN), curves.groups[0].chance[0], 0.0);
}

/* --- evidence fades -----------------------------------------------------------------------------
 */

static void after_a_half_life_evidence_weighs_half(void **state)
{
    add_known(*state, SCORE, SURE, 180, 104);
    for (int i = 0; i < 500; i++) {
        calibrators_age(*state, 500.0);
    }
    assert_near(chance_at(*state, SCORE, SURE), OWN, 1e-9); /* as 90 pairs, 52 true */
}

static void new_evidence_counts_in_full_beside_what_has_faded(void **state)
{
    add(*state, SCORE, SURE, 90, 52);
    calibrators_age(*state, 1.0);
    add_known(*state, SCORE, SURE, 45, 26);
    assert_near(chance_at(*state, SCORE, SURE), OWN, 1e-9); /* 45 + 45 pairs, 26 + 26 true */
}

/* Ruled 3 half-lives after it was counted, a pair is one ruled of one. */
static void a_late_ruling_weighs_what_its_pair_still_weighs(void **state)
{
    struct calibrators *calibrators = *state;
    assert_near(calibrators_weight(0.0, 40.0), 1.0, 0.0);
    assert_near(calibrators_weight(60.0, 20.0), 0.125, 1e-15);
    add(calibrators, SCORE, HALF, 1, 0);
    for (int i = 0; i < 60; i++) {
        calibrators_age(calibrators, 20.0);
    }
    calibrators_add_ruled(calibrators, SCORE, HALF, calibrators_weight(60.0, 20.0), true);
    assert_near(calibrators->bins[SCORE_BIN].cells[HALF].ruled, 1.0, 1e-12);
}

/* 2^40 is the first power beyond 1e12: the gain goes back to 1. */
static void a_great_gain_is_taken_back_and_nothing_else_changes(void **state)
{
    struct calibrators *calibrators = *state;
    for (int i = 0; i < 39; i++) {
        calibrators_age(calibrators, 1.0);
    }
    add(calibrators, SCORE, SURE, 180, 104);
    memset(calibrators->changed, 0, sizeof calibrators->changed);
    calibrators->bins[9].cells[LOW] =
        (struct calibrators_cell){0x1p46, 0x1p45, 0x1p44, 0x1p43, 0x1p42, 0x1p41};
    calibrators_age(calibrators, 1.0);
    const struct calibrators_cell halves = {64.0, 32.0, 16.0, 8.0, 4.0, 2.0};
    assert_near(calibrators->gain, 1.0, 0.0);
    assert_memory_equal(&calibrators->bins[9].cells[LOW], &halves, sizeof halves);
    assert_near(calibrators->bins[SCORE_BIN].cells[SURE].pairs, 90.0, 0.0);
    for (size_t b = 0; b < CALIBRATORS_BINS; b++) {
        assert_int_equal(calibrators->changed[b], 1);
    }
}

/* --- storing ------------------------------------------------------------------------------------
 */

static void add_at_random(struct calibrators *calibrators, struct repeatable *random, int items)
{
    for (int i = 0; i < items; i++) {
        calibrators_age(calibrators, 300.0);
        double score = 3.0 * repeatable_share(random) - 1.2;
        size_t tag_class = repeatable_below(random, CALIBRATORS_CLASSES);
        add(calibrators, score, tag_class, 2, (int)repeatable_below(random, 2));
        calibrators_add_known(calibrators, score, tag_class, repeatable_below(random, 2) == 1);
        calibrators_add_ruled(calibrators, score, tag_class, 0.3, repeatable_below(random, 2) == 1);
        calibrators_add_rest(calibrators, tag_class, 17.0);
    }
}

/* Stored when half way: the bins that changed, as bare doubles, and the gain. */
static void restored_from_its_parts_it_goes_on_bit_by_bit(void **state)
{
    static double parts[CALIBRATORS_BINS][132];
    static struct calibrators restored;
    struct calibrators *calibrators = *state;
    struct repeatable random = {8};
    for (int time = 0; time < 2; time++) {
        add_at_random(calibrators, &random, 400);
        for (size_t b = 0; b < CALIBRATORS_BINS; b++) {
            if (calibrators->changed[b]) {
                memcpy(parts[b], &calibrators->bins[b], sizeof parts[b]);
                calibrators->changed[b] = 0;
            }
        }
    }
    calibrators_init(&restored);
    restored.gain = calibrators->gain;
    memcpy(restored.bins, parts, sizeof restored.bins);
    struct repeatable same = random;
    add_at_random(calibrators, &random, 100);
    add_at_random(&restored, &same, 100);
    struct calibrators_curves curves;
    struct calibrators_curves curves_restored;
    fit(calibrators, &curves);
    fit(&restored, &curves_restored);
    assert_memory_equal(restored.bins, calibrators->bins, sizeof restored.bins);
    assert_memory_equal(&curves_restored, &curves, sizeof curves);
    assert_true(curves.groups[0].given > 0.0);
}

static void curves_are_five_parts_of_bare_doubles(void **state)
{
    double parts[CALIBRATORS_GROUPS][129];
    struct calibrators_curves curves;
    struct calibrators_curves restored;
    struct repeatable random = {9};
    add_at_random(*state, &random, 400);
    fit(*state, &curves);
    for (size_t g = 0; g < CALIBRATORS_GROUPS; g++) {
        memcpy(parts[g], &curves.groups[g], sizeof parts[g]);
    }
    memcpy(&restored, parts, sizeof restored);
    assert_int_equal(sizeof curves, sizeof parts);
    assert_near(calibrators_chance(&restored, 0.4, 0.113), calibrators_chance(&curves, 0.4, 0.113),
                0.0);
    assert_int_equal(calibrators_early(&restored), calibrators_early(&curves));
}

int main(void)
{
#define calibrators_test(name) cmocka_unit_test_setup(name, set_up)
    const struct CMUnitTest tests[] = {
        calibrators_test(without_evidence_every_group_has_the_prior),
        calibrators_test(without_evidence_it_is_early),
        calibrators_test(two_hundred_given_above_the_floor_over_all_groups_are_enough),
        calibrators_test(known_pairs_are_counted_as_they_are),
        calibrators_test(a_group_without_evidence_has_the_pooled_curve),
        calibrators_test(pairs_surely_given_are_as_good_as_known),
        calibrators_test(what_was_wrongly_given_becomes_known_not_to_belong),
        calibrators_test(no_more_is_taken_off_than_was_given),
        calibrators_test(a_wrong_pair_is_taken_off_below_its_score_of_today),
        calibrators_test(a_ruling_counts_beside_the_pairs),
        calibrators_test(the_rest_at_the_floor_is_counted_in_one_go),
        calibrators_test(the_rest_lowers_the_chance_at_the_floor),
        calibrators_test(a_pair_at_the_floor_score_is_one_of_the_rest),
        calibrators_test(a_bin_is_marked_whatever_is_added_to_it),
        calibrators_test(classes_are_octaves),
        calibrators_test(the_rarest_and_the_unused_share_the_last_class),
        calibrators_test(a_tag_counted_more_often_than_items_is_the_commonest),
        calibrators_test(the_middle_of_a_class_is_in_it),
        calibrators_test(groups_are_cut_at_their_lower_edge),
        calibrators_test(between_two_middles_the_chance_is_on_a_straight_line),
        calibrators_test(just_above_the_floor_the_floor_has_no_part_in_the_chance),
        calibrators_test(beyond_the_last_bin_the_chance_stays),
        calibrators_test(what_is_no_score_is_taken_for_one_at_the_floor),
        calibrators_test(after_a_half_life_evidence_weighs_half),
        calibrators_test(new_evidence_counts_in_full_beside_what_has_faded),
        calibrators_test(a_late_ruling_weighs_what_its_pair_still_weighs),
        calibrators_test(a_great_gain_is_taken_back_and_nothing_else_changes),
        calibrators_test(restored_from_its_parts_it_goes_on_bit_by_bit),
        calibrators_test(curves_are_five_parts_of_bare_doubles),
    };
    return cmocka_run_group_tests_name("calibrators", tests, NULL, NULL);
}
