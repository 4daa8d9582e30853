/*
 * What the standing answers: figures and their errors, gains, bands, unknown values. Items here
 * have one given tag of propensity .5 that is hit in the first place or not at all: P@1 amounts to
 * 1 or 0, true P@1 to 2 or 0.
 */
#include "daemon/learner/standing.h"

#include "tests/unit/standing_fixture.h"

static void add_times(struct standing *standing, int times, bool is_hit, int without)
{
    for (int i = 0; i < times; i++) {
        add_one_tag(standing, is_hit, without);
    }
}

/* --- figures ------------------------------------------------------------------------------------
 */

static void a_figure_is_the_sum_of_amounts_over_that_of_bases(void **state)
{
    add_times(*state, 3, true, -1);
    add_times(*state, 1, false, -1);
    struct standing_in_band all = ask_all(*state, 0);
    assert_near(all.with[RANKING_P1].value, 3.0 / 4, 1e-15);
    assert_near(all.with[RANKING_P5].value, 3.0 / 20, 1e-15);
    assert_near(all.with[RANKING_PSP5].value, 6.0 / 8, 1e-15);
    assert_near(all.with[RANKING_TRUE_P1].value, 6.0 / 4, 1e-15);
    assert_near(all.with[RANKING_R10].value, 3.0 / 4, 1e-15);
}

/* Three of four: Σ(a - .75)² = 3·.0625 + .5625 = .75; √(4/3·.75)/4 = .25. */
static void the_error_is_that_of_a_mean_where_the_basis_is_the_same(void **state)
{
    add_times(*state, 3, true, -1);
    add_times(*state, 1, false, -1);
    struct standing_in_band all = ask_all(*state, 0);
    assert_near(all.with[RANKING_P1].error, 0.25, 1e-14);
    assert_near(all.with[RANKING_TRUE_P1].error, 0.5, 1e-14); /* twice the amounts */
    assert_near(all.with[RANKING_P5].error, 0.05, 1e-14);     /* five times the bases */
}

/* Two items, amounts and bases of PSP@1: 4 of 4 (p = .25) and 0 of 1 (p = 1). Value 4/5;
 * Σ(a - .8b)² = .8² + .8² = 1.28; √(2/1·1.28)/5 = .32. */
static void the_error_of_a_ratio_looks_at_both_sums(void **state)
{
    static const double quarter = 0.25;
    static const double one = 1.0;
    static const struct ranking_proposal hit = {0.25, true};
    struct ranking_truth truths[STANDING_BANDS] = {{&quarter, 1}};
    struct ranking_list lists[STANDING_BANDS] = {{&hit, 1}};
    standing_add(*state, truths, lists, NULL);
    truths[STANDING_ALL].propensities = &one;
    lists[STANDING_ALL].count = 0;
    standing_add(*state, truths, lists, NULL);
    struct standing_figure psp = ask_all(*state, 0).with[RANKING_PSP1];
    assert_near(psp.value, 0.8, 1e-15);
    assert_near(psp.error, 0.32, 1e-14);
}

/* --- gains --------------------------------------------------------------------------------------
 */

/* Of ten items both hit three, the learner alone three, the shadow alone one: 6/4 - 1 = .5.
 * Σ(a - 1.5a')² = 3·.25 + 3·1 + 1·2.25 = 6; √(10/9·6)/4 = .64550; 1.64485 times that is 1.06175.
 * Three wins, one loss: 2·(4 + 1)/16 = .625. */
static void a_gain_is_the_learner_s_sum_over_the_shadow_s(void **state)
{
    add_times(*state, 3, true, 1);
    add_times(*state, 3, true, 0);
    add_times(*state, 1, false, 1);
    add_times(*state, 3, false, 0);
    struct standing_gain gain = ask_all(*state, 0).gain[RANKING_P1];
    assert_near(gain.value, 0.5, 1e-15);
    assert_near(gain.low, 0.5 - 1.06175, 1e-5);
    assert_near(gain.high, 0.5 + 1.06175, 1e-5);
    assert_int_equal(gain.wins, 3);
    assert_int_equal(gain.losses, 1);
    assert_near(gain.p, 0.625, 1e-14);
}

/* Of three pairs the shadow hits two: Σ(a - 2/3)² = 2/3; √(3/2·2/3)/3 = 1/3. */
static void what_the_shadow_did_not_score_enters_no_gain(void **state)
{
    add_times(*state, 5, true, -1);
    add_times(*state, 1, true, 1);
    add_times(*state, 1, false, 1);
    add_times(*state, 1, false, 0);
    struct standing_in_band all = ask_all(*state, 0);
    assert_int_equal(all.items, 8);
    assert_int_equal(all.paired, 3);
    assert_near(all.with[RANKING_P1].value, 6.0 / 8, 1e-15);
    assert_near(all.without[RANKING_P1].value, 2.0 / 3, 1e-15);
    assert_near(all.without[RANKING_P1].error, 1.0 / 3, 1e-14);
    assert_near(all.gain[RANKING_P1].value, -0.5, 1e-15);
}

/* Worths of .1, .15, .3 and .7 in two orders add up to sums that differ in their last bit. */
static void the_same_hits_in_another_order_are_no_win(void **state)
{
    static const double given[] = {0.1, 0.15, 0.3, 0.7};
    static const struct ranking_proposal one[] = {
        {0.1, true}, {0.15, true}, {0.3, true}, {0.7, true}};
    static const struct ranking_proposal other[] = {
        {0.7, true}, {0.3, true}, {0.15, true}, {0.1, true}};
    assert_true(1 / 0.1 + 1 / 0.15 + 1 / 0.3 + 1 / 0.7 != 1 / 0.7 + 1 / 0.3 + 1 / 0.15 + 1 / 0.1);
    struct ranking_truth truths[STANDING_BANDS] = {{given, 4}};
    struct ranking_list with[STANDING_BANDS] = {{one, 4}};
    struct ranking_list without[STANDING_BANDS] = {{other, 4}};
    standing_add(*state, truths, with, without);
    struct standing_in_band all = ask_all(*state, 0);
    assert_int_equal(all.gain[RANKING_PSP5].wins + all.gain[RANKING_PSP5].losses, 0);
    assert_int_equal(all.gain[RANKING_PSNDCG5].wins, 1); /* there the order counts */
}

/* --- what is not known --------------------------------------------------------------------------
 */

static void a_new_standing_knows_nothing(void **state)
{
    struct standing_answer answer;
    standing_ask(*state, 0, &answer);
    assert_int_equal(answer.items, 0);
    for (size_t band = 0; band < STANDING_BANDS; band++) {
        for (size_t i = 0; i < RANKING_FIGURES; i++) {
            assert_true(isnan(answer.bands[band].with[i].value));
            assert_true(isnan(answer.bands[band].with[i].error));
            assert_true(isnan(answer.bands[band].without[i].value));
            assert_true(isnan(answer.bands[band].gain[i].value));
            assert_true(isnan(answer.bands[band].gain[i].p));
        }
    }
}

static void one_item_has_a_value_and_no_error(void **state)
{
    add_one_tag(*state, true, 1);
    struct standing_in_band all = ask_all(*state, 0);
    assert_near(all.with[RANKING_P1].value, 1.0, 0.0);
    assert_true(isnan(all.with[RANKING_P1].error));
    assert_near(all.gain[RANKING_P1].value, 0.0, 0.0);
    assert_true(isnan(all.gain[RANKING_P1].low));
    assert_true(isnan(all.gain[RANKING_P1].high));
}

static void a_gain_over_a_shadow_that_hit_nothing_is_unknown(void **state)
{
    add_times(*state, 4, true, 0);
    struct standing_in_band all = ask_all(*state, 0);
    assert_near(all.without[RANKING_P1].value, 0.0, 0.0);
    assert_true(isnan(all.gain[RANKING_P1].value));
    assert_true(isnan(all.gain[RANKING_P1].high));
    assert_int_equal(all.gain[RANKING_P1].wins, 4);
    assert_near(all.gain[RANKING_P1].p, 2.0 / 16, 1e-15);
}

/* --- bands --------------------------------------------------------------------------------------
 */

static void an_item_counts_in_the_bands_of_its_given_tags_only(void **state)
{
    add_one_tag(*state, true, -1); /* tail */
    struct standing_answer answer;
    standing_ask(*state, 0, &answer);
    assert_int_equal(answer.bands[STANDING_TAIL].items, 1);
    assert_int_equal(answer.bands[STANDING_HEAD].items, 0);
    assert_near(answer.bands[STANDING_TAIL].with[RANKING_P1].value, 1.0, 0.0);
    assert_true(isnan(answer.bands[STANDING_HEAD].with[RANKING_P1].value));
}

static void an_item_without_any_given_tag_changes_no_figure(void **state)
{
    struct ranking_truth nothing[STANDING_BANDS] = {{NULL, 0}};
    struct ranking_list none[STANDING_BANDS] = {{NULL, 0}};
    add_one_tag(*state, true, 1);
    standing_add(*state, nothing, none, none);
    struct standing_answer answer;
    standing_ask(*state, 0, &answer);
    assert_int_equal(answer.items, 2);
    assert_int_equal(answer.bands[STANDING_ALL].items, 1);
    assert_near(answer.bands[STANDING_ALL].with[RANKING_P1].value, 1.0, 0.0);
}

static void a_tag_s_count_says_its_band(void **state)
{
    (void)state;
    assert_int_equal(standing_band_of(0), STANDING_TAIL);
    assert_int_equal(standing_band_of(29), STANDING_TAIL);
    assert_int_equal(standing_band_of(30), STANDING_TORSO);
    assert_int_equal(standing_band_of(999), STANDING_TORSO);
    assert_int_equal(standing_band_of(1000), STANDING_HEAD);
}

static void every_band_has_its_name(void **state)
{
    (void)state;
    assert_string_equal(standing_band_name(STANDING_ALL), "all");
    assert_string_equal(standing_band_name(STANDING_HEAD), "head");
    assert_string_equal(standing_band_name(STANDING_TORSO), "torso");
    assert_string_equal(standing_band_name(STANDING_TAIL), "tail");
}

static void rulings_show_in_the_reliability(void **state)
{
    standing_ruled(*state, 0.84, true);
    standing_ruled(*state, 0.82, false);
    struct reliability_row rows[RELIABILITY_CLASSES];
    standing_reliability(*state, rows);
    assert_int_equal(rows[8].shown, 2);
    assert_int_equal(rows[8].confirmed, 1);
    assert_near(rows[8].mean_chance, 0.83, 1e-15);
}

#define test(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        test(a_figure_is_the_sum_of_amounts_over_that_of_bases),
        test(the_error_is_that_of_a_mean_where_the_basis_is_the_same),
        test(the_error_of_a_ratio_looks_at_both_sums),
        test(a_gain_is_the_learner_s_sum_over_the_shadow_s),
        test(what_the_shadow_did_not_score_enters_no_gain),
        test(the_same_hits_in_another_order_are_no_win),
        test(a_new_standing_knows_nothing),
        test(one_item_has_a_value_and_no_error),
        test(a_gain_over_a_shadow_that_hit_nothing_is_unknown),
        test(an_item_counts_in_the_bands_of_its_given_tags_only),
        test(an_item_without_any_given_tag_changes_no_figure),
        test(a_tag_s_count_says_its_band),
        test(every_band_has_its_name),
        test(rulings_show_in_the_reliability),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
