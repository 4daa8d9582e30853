/*
 * Two taggings of the same items: Chapman's estimator on published examples, and inter-indexer
 * consistency by Rolling's and by Hooper's measure.
 */
#include "daemon/learner/capture.h"

#include "tests/unit/near.h"

/* A textbook's turtles (from memory): 10 marked, 15 caught later, 5 of them marked:
 * 11·16/6 - 1 = 28.33. Seber's variance: 11·16·5·10/(36·7) = 34.92. */
static void turtles_marked_and_caught_again(void **state)
{
    (void)state;
    struct capture_estimate estimate = capture_total(&(struct capture_counts){10.0, 15.0, 5.0});
    assert_near(estimate.total, 28.3333333333, 1e-9);
    assert_near(estimate.variance, 34.9206349206, 1e-9);
    assert_true(estimate.low < estimate.total && estimate.total < estimate.high);
}

/* Krebs, Ecological Methodology (from memory): 948 marked, 421 caught later, 167 of them marked:
 * 949·422/168 - 1 = 2382.8, printed as 2383. */
static void fish_marked_and_caught_again(void **state)
{
    (void)state;
    struct capture_estimate estimate = capture_total(&(struct capture_counts){948.0, 421.0, 167.0});
    assert_near(estimate.total, 2382.797619, 1e-6);
}

/* Turtles: seen 20, unseen 8.3333; sd of ln unseen √ln(1 + 34.9206/69.4444) = .638254;
 * e^(1.644854·.638254) = 2.857178: 20 + 2.916632 and 20 + 23.809813. */
static void the_interval_never_goes_below_what_was_seen(void **state)
{
    (void)state;
    struct capture_estimate estimate = capture_total(&(struct capture_counts){10.0, 15.0, 5.0});
    assert_near(estimate.low, 22.916632, 1e-6);
    assert_near(estimate.high, 43.809813, 1e-6);
}

static void taggings_that_agree_leave_nothing_unseen(void **state)
{
    (void)state;
    struct capture_estimate estimate = capture_total(&(struct capture_counts){7.0, 7.0, 7.0});
    assert_near(estimate.total, 7.0, 1e-12);
    assert_near(estimate.low, 7.0, 1e-12);
    assert_near(estimate.high, 7.0, 1e-12);
}

/* Nothing in common is no contradiction: 4·6/1 - 1 = 23. */
static void taggings_without_a_common_pair_have_an_estimate(void **state)
{
    (void)state;
    struct capture_estimate estimate = capture_total(&(struct capture_counts){3.0, 5.0, 0.0});
    assert_near(estimate.total, 23.0, 1e-12);
    assert_true(estimate.low >= 8.0);
}

/* 10/28.3333. */
static void the_first_tagging_s_completeness_is_its_share_of_the_total(void **state)
{
    (void)state;
    struct capture_counts counts = {10.0, 15.0, 5.0};
    struct capture_share share = capture_completeness(&counts);
    struct capture_estimate estimate = capture_total(&counts);
    assert_near(share.share, 0.352941, 1e-6);
    assert_near(share.low, 10.0 / estimate.high, 1e-12);
    assert_near(share.high, 10.0 / estimate.low, 1e-12);
}

static void nothing_tagged_says_nothing_of_completeness(void **state)
{
    (void)state;
    struct capture_share share = capture_completeness(&(struct capture_counts){0.0, 0.0, 0.0});
    assert_true(share.low == 0.0 && share.high == 1.0);
}

/* Six and four terms, three in common: 2·3/10 (Rolling 1981), 3/(6 + 4 - 3) (Hooper 1965). */
static void consistency_by_both_measures(void **state)
{
    (void)state;
    struct capture_counts counts = {6.0, 4.0, 3.0};
    assert_near(capture_consistency_rolling(&counts), 0.6, 1e-15);
    assert_near(capture_consistency_hooper(&counts), 3.0 / 7.0, 1e-15);
}

static void two_empty_taggings_are_consistent(void **state)
{
    (void)state;
    struct capture_counts none = {0.0, 0.0, 0.0};
    assert_true(capture_consistency_rolling(&none) == 1.0);
    assert_true(capture_consistency_hooper(&none) == 1.0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(turtles_marked_and_caught_again),
        cmocka_unit_test(fish_marked_and_caught_again),
        cmocka_unit_test(the_interval_never_goes_below_what_was_seen),
        cmocka_unit_test(taggings_that_agree_leave_nothing_unseen),
        cmocka_unit_test(taggings_without_a_common_pair_have_an_estimate),
        cmocka_unit_test(the_first_tagging_s_completeness_is_its_share_of_the_total),
        cmocka_unit_test(nothing_tagged_says_nothing_of_completeness),
        cmocka_unit_test(consistency_by_both_measures),
        cmocka_unit_test(two_empty_taggings_are_consistent),
    };
    return cmocka_run_group_tests_name("capture", tests, NULL, NULL);
}
