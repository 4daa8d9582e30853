/*
 * What is to be expected of a tag: its counts as completeness.h takes them, its propensity and the
 * items that lack it.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "daemon/outlook.h"

#include "tests/unit/engine_fixture.h"
#include "tests/unit/near.h"

enum {
    DOCUMENTS = 5000
};

/* A desk that nobody has checked yet, and the tag "fog signal" of it. */
struct desk {
    struct outlook outlook;
    struct vocabulary_counts counts;
};

static int set_up(void **state)
{
    static struct desk desk;
    struct propensity_curve curve = propensity_curve_default();
    desk = (struct desk){.counts = {.count = 40, .unprompted = 30, .unchecked = 25}};
    propensity_fit_default(&curve, &desk.outlook.fit);
    desk.outlook.documents = DOCUMENTS;
    desk.outlook.growth = propensity_growth(DOCUMENTS);
    *state = &desk;
    return 0;
}

/* --- counts -------------------------------------------------------------------------------------
 */

static void each_count_is_taken_for_what_it_is(void **state)
{
    (void)state;
    const struct vocabulary_counts counts = {
        .count = 40, .unprompted = 30, .unchecked = 25, .found = 3};
    struct completeness_tag tag = outlook_of_tag(&counts);
    assert_near(tag.count, 40.0, 0.0);
    assert_near(tag.tag_count, 30.0, 0.0);
    assert_near(tag.unprompted_open, 25.0, 0.0);
    assert_near(tag.found, 3.0, 0.0);
    assert_near(tag.trials, 0.0, 0.0);
    assert_near(tag.given, 0.0, 0.0);
}

static void a_pair_that_a_check_found_is_a_trial(void **state)
{
    (void)state;
    const struct vocabulary_counts counts = {.check_true = 8, .check_given = 5};
    struct completeness_tag tag = outlook_of_tag(&counts);
    assert_near(tag.trials, 8.0, 0.0);
    assert_near(tag.given, 5.0, 0.0);
}

static void a_second_tagging_is_half_a_trial(void **state)
{
    (void)state;
    const struct vocabulary_counts counts = {.second_true = 7, .second_given = 3};
    struct completeness_tag tag = outlook_of_tag(&counts);
    assert_near(tag.trials, 3.5, 0.0);
    assert_near(tag.given, 1.5, 0.0);
}

static void checks_and_second_taggings_add_up(void **state)
{
    (void)state;
    const struct vocabulary_counts counts = {
        .check_true = 8, .check_given = 5, .second_true = 7, .second_given = 3};
    struct completeness_tag tag = outlook_of_tag(&counts);
    assert_near(tag.trials, 11.5, 0.0);
    assert_near(tag.given, 6.5, 0.0);
}

/* What editors ruled on gaps is no random sample. */
static void rulings_are_no_trials(void **state)
{
    (void)state;
    const struct vocabulary_counts counts = {.ruled_belongs = 9, .ruled_not = 4};
    struct completeness_tag tag = outlook_of_tag(&counts);
    assert_near(tag.trials, 0.0, 0.0);
    assert_near(tag.given, 0.0, 0.0);
    assert_near(tag.found, 0.0, 0.0);
}

/* The largest counts there can be do not wrap around. */
static void counts_may_be_as_large_as_they_can(void **state)
{
    (void)state;
    const struct vocabulary_counts counts = {.check_true = UINT32_MAX, .second_true = UINT32_MAX};
    assert_near(outlook_of_tag(&counts).trials, 1.5 * (double)UINT32_MAX, 0.0);
}

/* --- the propensity -----------------------------------------------------------------------------
 */

/* p = 1/(1 + (ln N - 1)·((N_l + B)/(1 + B))^-A) with A = .55, B = 1.5 (Jain, Prabhu, Varma 2016):
 * N = 5,000, N_l = 30: 7.517193·(31.5/2.5)^-.55 = 7.517193·.248197 = 1.865743: p = .348950. */
static void without_checks_the_propensity_is_the_curve_s(void **state)
{
    const struct desk *desk = *state;
    assert_near(outlook_propensity_mean(&desk->outlook, &desk->counts), 0.348950, 1e-6);
    struct propensity_of_tag full = outlook_propensity(&desk->outlook, &desk->counts);
    assert_int_equal(full.from, PROPENSITY_FROM_CURVE);
    assert_true(full.low < full.p && full.p < full.high);
}

static void the_mean_alone_is_that_of_the_full_posterior(void **state)
{
    struct desk *desk = *state;
    static const uint32_t uses[] = {0, 1, 2, 30, 4000};
    for (size_t i = 0; i < 5; i++) {
        for (uint32_t trials = 0; trials <= 40; trials++) {
            for (uint32_t given = 0; given <= trials && given <= uses[i]; given += 3) {
                desk->counts = (struct vocabulary_counts){.unprompted = uses[i],
                                                          .check_true = trials / 2,
                                                          .check_given = given / 2,
                                                          .second_true = trials - trials / 2,
                                                          .second_given = given - given / 2};
                assert_near(outlook_propensity_mean(&desk->outlook, &desk->counts),
                            outlook_propensity(&desk->outlook, &desk->counts).p, 1e-12);
            }
        }
    }
}

static void hidden_pairs_lower_the_propensity_and_given_ones_raise_it(void **state)
{
    struct desk *desk = *state;
    double before = outlook_propensity_mean(&desk->outlook, &desk->counts);
    desk->counts.check_true = 10;
    double lower = outlook_propensity_mean(&desk->outlook, &desk->counts);
    desk->counts.check_given = 10;
    double higher = outlook_propensity_mean(&desk->outlook, &desk->counts);
    assert_true(lower < before - 0.05);
    assert_true(higher > before + 0.05);
}

static void two_second_taggings_say_as_much_as_one_check(void **state)
{
    struct desk *desk = *state;
    desk->counts.check_true = 6;
    desk->counts.check_given = 4;
    double checked = outlook_propensity_mean(&desk->outlook, &desk->counts);
    desk->counts.check_true = 0;
    desk->counts.check_given = 0;
    desk->counts.second_true = 12;
    desk->counts.second_given = 8;
    assert_near(outlook_propensity_mean(&desk->outlook, &desk->counts), checked, 1e-15);
    assert_near(outlook_propensity(&desk->outlook, &desk->counts).p, checked, 1e-12);
}

/* Pairs given on proposals say nothing of how often it is given unasked. */
static void prompted_uses_do_not_raise_the_propensity(void **state)
{
    struct desk *desk = *state;
    double before = outlook_propensity_mean(&desk->outlook, &desk->counts);
    desk->counts.count = 4000;
    assert_near(outlook_propensity_mean(&desk->outlook, &desk->counts), before, 0.0);
}

/* --- what is missing ----------------------------------------------------------------------------
 */

/* (U - α)(1 - p)/p = (25 - α)·1.865743, with p as above. */
static void missing_are_as_many_as_the_open_ones_stand_for(void **state)
{
    const struct desk *desk = *state;
    double open = 25.0 - desk->outlook.fit.rarity;
    assert_near(outlook_missing(&desk->outlook, &desk->counts), open * 1.865743, 1e-4);
}

static void a_pair_found_is_no_longer_missing(void **state)
{
    struct desk *desk = *state;
    double before = outlook_missing(&desk->outlook, &desk->counts);
    desk->counts.found = 7;
    desk->counts.count += 7;
    assert_near(outlook_missing(&desk->outlook, &desk->counts), before - 7.0, 1e-9);
}

static void never_fewer_than_none_are_missing(void **state)
{
    struct desk *desk = *state;
    desk->counts.found = 1000;
    assert_near(outlook_missing(&desk->outlook, &desk->counts), 0.0, 0.0);
    desk->counts = (struct vocabulary_counts){0};
    assert_near(outlook_missing(&desk->outlook, &desk->counts), 0.0, 0.0);
}

static void items_gone_through_hide_nothing(void **state)
{
    struct desk *desk = *state;
    desk->counts.unchecked = 0;
    assert_near(outlook_missing(&desk->outlook, &desk->counts), 0.0, 0.0);
}

static void what_is_missing_agrees_with_the_share(void **state)
{
    struct desk *desk = *state;
    desk->counts.check_true = 9;
    desk->counts.check_given = 4;
    desk->counts.second_true = 5;
    desk->counts.second_given = 2;
    desk->counts.found = 2;
    struct completeness_tag tag = outlook_of_tag(&desk->counts);
    struct completeness whole = completeness_of_tag(&desk->outlook.fit, &tag, DOCUMENTS);
    assert_near(outlook_missing(&desk->outlook, &desk->counts), whole.missing, 1e-9);
    assert_near(whole.share, 40.0 / (40.0 + whole.missing), 1e-12);
}

/* --- the desk -----------------------------------------------------------------------------------
 */

static void it_begins_with_the_desk_as_it_is(void **state)
{
    struct opened *opened = *state;
    struct outlook outlook;
    struct propensity_fit fit;
    struct propensity_curve curve = propensity_curve_default();
    uint64_t seq = 0;
    memset(&outlook, 0xff, sizeof outlook);
    (void)FILE_ITEM(opened, "log/1", "dense fog at the harbour mouth", "fog signal");
    seq = FILE_ITEM(opened, "log/2", "lamp trimmed before dusk", "lamp");
    wait_until_learned(opened, seq);
    assert_int_equal(outlook_begin(opened->engine, DOCUMENTS, &outlook), 0);
    assert_near(outlook.documents, DOCUMENTS, 0.0);
    assert_near(outlook.growth, log(5000.0) - 1.0, 1e-12);
    assert_true(outlook.learned == seq);
    propensity_fit_default(&curve, &fit);
    assert_memory_equal(&outlook.fit, &fit, sizeof fit);
}

static void what_it_rests_on_has_a_name(void **state)
{
    (void)state;
    assert_string_equal(outlook_from(PROPENSITY_FROM_CURVE), "curve");
    assert_string_equal(outlook_from(PROPENSITY_FROM_CHECKS), "checks");
    assert_string_equal(outlook_from(PROPENSITY_FROM_BOTH), "both");
}

int main(void)
{
#define outlook_test(name) cmocka_unit_test_setup(name, set_up)
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup_teardown(it_begins_with_the_desk_as_it_is, opened_set_up,
                                        opened_tear_down),
        outlook_test(each_count_is_taken_for_what_it_is),
        outlook_test(a_pair_that_a_check_found_is_a_trial),
        outlook_test(a_second_tagging_is_half_a_trial),
        outlook_test(checks_and_second_taggings_add_up),
        outlook_test(rulings_are_no_trials),
        outlook_test(counts_may_be_as_large_as_they_can),
        outlook_test(without_checks_the_propensity_is_the_curve_s),
        outlook_test(the_mean_alone_is_that_of_the_full_posterior),
        outlook_test(hidden_pairs_lower_the_propensity_and_given_ones_raise_it),
        outlook_test(two_second_taggings_say_as_much_as_one_check),
        outlook_test(prompted_uses_do_not_raise_the_propensity),
        outlook_test(missing_are_as_many_as_the_open_ones_stand_for),
        outlook_test(a_pair_found_is_no_longer_missing),
        outlook_test(never_fewer_than_none_are_missing),
        outlook_test(items_gone_through_hide_nothing),
        outlook_test(what_is_missing_agrees_with_the_share),
        outlook_test(what_it_rests_on_has_a_name),
    };
    return cmocka_run_group_tests_name("outlook", tests, NULL, NULL);
}
