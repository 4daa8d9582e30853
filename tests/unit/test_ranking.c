/*
 * One item's figures, worked by hand. The item: five logbook tags given, of propensity .5, .25, 1,
 * .2 and .5, so that their worths 1/p are 2, 4, 1, 5, 2. Discounts: d1 = 1, d2 = 1/log2(3) =
 * .63093, d3 = 1/log2(4) = .5, d4 = 1/log2(5) = .43068, d5 = 1/log2(6) = .38685.
 */
#include "daemon/learner/ranking.h"

#include "tests/unit/near.h"

#define LENGTH(array) (sizeof(array) / sizeof(array)[0])

static const double five_given[] = {0.5, 0.25, 1.0, 0.2, 0.5};
static const struct ranking_truth five = {five_given, LENGTH(five_given)};

/* Hits in the places 1 (worth 4), 4 (worth 2) and 8 (worth 5). */
static const struct ranking_proposal three_hits[] = {
    {0.25, true}, {0.1, false}, {0.3, false}, {0.5, true},  {0.9, false},
    {0.9, false}, {0.9, false}, {0.2, true},  {0.9, false}, {0.9, false},
};

static double amount(const struct ranking_truth *truth, const struct ranking_proposal *proposals,
                     size_t count, enum ranking_figure figure)
{
    struct ranking_list list = {proposals, count};
    struct ranking_amounts amounts;
    ranking_amounts(truth, &list, &amounts);
    return amounts.of[figure];
}

static double of_three_hits(enum ranking_figure figure)
{
    return amount(&five, three_hits, LENGTH(three_hits), figure);
}

static double basis(const struct ranking_truth *truth, enum ranking_figure figure)
{
    struct ranking_amounts bases;
    ranking_bases(truth, &bases);
    return bases.of[figure];
}

static void precision_counts_the_hits_among_k_places(void **state)
{
    (void)state;
    assert_near(of_three_hits(RANKING_P1), 1.0, 0.0);
    assert_near(of_three_hits(RANKING_P3), 1.0, 0.0);
    assert_near(of_three_hits(RANKING_P5), 2.0, 0.0);
    assert_near(basis(&five, RANKING_P1), 1.0, 0.0);
    assert_near(basis(&five, RANKING_P3), 3.0, 0.0);
    assert_near(basis(&five, RANKING_P5), 5.0, 0.0);
}

static void true_precision_counts_what_each_hit_stands_for(void **state)
{
    (void)state;
    assert_near(of_three_hits(RANKING_TRUE_P1), 4.0, 0.0);
    assert_near(of_three_hits(RANKING_TRUE_P5), 6.0, 0.0); /* 4 + 2 */
    assert_near(basis(&five, RANKING_TRUE_P3), 3.0, 0.0);
    assert_near(basis(&five, RANKING_TRUE_P5), 5.0, 0.0);
}

static void recall_at_ten_is_the_share_of_the_given_tags(void **state)
{
    (void)state;
    assert_near(of_three_hits(RANKING_R10), 3.0 / 5.0, 1e-15);
    assert_near(basis(&five, RANKING_R10), 1.0, 0.0);
}

static void ndcg_is_the_discounted_gain_over_that_of_the_best_order(void **state)
{
    (void)state;
    /* (1 + .43068)/(1 + .63093 + .5 + .43068 + .38685) = 1.43068/2.94846 */
    assert_near(of_three_hits(RANKING_NDCG5), 1.43068 / 2.94846, 1e-5);
    assert_near(basis(&five, RANKING_NDCG5), 1.0, 0.0);
}

static void ndcg_s_best_order_has_no_more_hits_than_tags(void **state)
{
    (void)state;
    static const double two_given[] = {0.5, 0.5};
    static const struct ranking_truth two = {two_given, 2};
    /* (1 + .43068)/(1 + .63093) */
    assert_near(amount(&two, three_hits, 7, RANKING_NDCG5), 1.43068 / 1.63093, 1e-5);
}

static void psp_is_set_against_the_rarest_given_tags(void **state)
{
    (void)state;
    assert_near(of_three_hits(RANKING_PSP3), 4.0, 0.0);
    assert_near(of_three_hits(RANKING_PSP5), 6.0, 0.0);
    assert_near(basis(&five, RANKING_PSP1), 5.0, 0.0);
    assert_near(basis(&five, RANKING_PSP3), 5.0 + 4.0 + 2.0, 0.0);
    assert_near(basis(&five, RANKING_PSP5), 5.0 + 4.0 + 2.0 + 2.0 + 1.0, 0.0);
}

static void psndcg_discounts_the_worth_of_each_place(void **state)
{
    (void)state;
    /* 4·1 + 2·.43068; the best: 5·1 + 4·.63093 + 2·.5 + 2·.43068 + 1·.38685 */
    assert_near(of_three_hits(RANKING_PSNDCG5), 4.86136, 1e-4);
    assert_near(basis(&five, RANKING_PSNDCG5), 9.77193, 1e-4);
}

static void of_many_given_tags_only_the_five_rarest_can_be_attained(void **state)
{
    (void)state;
    static const double eight_given[] = {1.0, 0.125, 0.5, 0.2, 1.0, 0.25, 0.5, 1.0};
    static const struct ranking_truth eight = {eight_given, LENGTH(eight_given)};
    assert_near(basis(&eight, RANKING_PSP1), 8.0, 0.0);
    assert_near(basis(&eight, RANKING_PSP5), 8.0 + 5.0 + 4.0 + 2.0 + 2.0, 0.0);
    assert_near(basis(&eight, RANKING_P5), 5.0, 0.0);
}

static void fewer_given_tags_than_places_are_all_that_can_be_attained(void **state)
{
    (void)state;
    static const double one_given[] = {0.25};
    static const struct ranking_truth one = {one_given, 1};
    assert_near(basis(&one, RANKING_PSP1), 4.0, 0.0);
    assert_near(basis(&one, RANKING_PSP5), 4.0, 0.0);
    assert_near(basis(&one, RANKING_PSNDCG5), 4.0, 0.0);
}

static void the_best_list_reaches_every_basis_but_precision_s(void **state)
{
    (void)state;
    static const struct ranking_proposal best[] = {
        {0.2, true}, {0.25, true}, {0.5, true}, {0.5, true}, {1.0, true}};
    static const enum ranking_figure reached[] = {RANKING_NDCG5, RANKING_PSP1,    RANKING_PSP3,
                                                  RANKING_PSP5,  RANKING_PSNDCG5, RANKING_R10};
    for (size_t i = 0; i < LENGTH(reached); i++) {
        assert_near(amount(&five, best, LENGTH(best), reached[i]), basis(&five, reached[i]), 0.0);
    }
}

static void an_empty_place_is_a_miss(void **state)
{
    (void)state;
    assert_near(amount(&five, three_hits, 1, RANKING_P5), 1.0, 0.0);
    assert_near(amount(&five, three_hits, 1, RANKING_PSP5), 4.0, 0.0);
    assert_near(amount(&five, NULL, 0, RANKING_R10), 0.0, 0.0);
}

static void what_stands_beyond_the_tenth_place_does_not_count(void **state)
{
    (void)state;
    struct ranking_proposal eleven[11] = {{0}};
    eleven[10] = (struct ranking_proposal){0.5, true};
    assert_near(amount(&five, eleven, 11, RANKING_R10), 0.0, 0.0);
    eleven[9] = eleven[10];
    assert_near(amount(&five, eleven, 11, RANKING_R10), 1.0 / 5.0, 1e-15);
}

static void every_figure_has_its_name(void **state)
{
    (void)state;
    assert_string_equal(ranking_name(RANKING_P1), "P@1");
    assert_string_equal(ranking_name(RANKING_NDCG5), "nDCG@5");
    assert_string_equal(ranking_name(RANKING_PSP5), "PSP@5");
    assert_string_equal(ranking_name(RANKING_PSNDCG5), "PSnDCG@5");
    assert_string_equal(ranking_name(RANKING_R10), "R@10");
    assert_string_equal(ranking_name(RANKING_TRUE_P5), "true P@5");
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(precision_counts_the_hits_among_k_places),
        cmocka_unit_test(true_precision_counts_what_each_hit_stands_for),
        cmocka_unit_test(recall_at_ten_is_the_share_of_the_given_tags),
        cmocka_unit_test(ndcg_is_the_discounted_gain_over_that_of_the_best_order),
        cmocka_unit_test(ndcg_s_best_order_has_no_more_hits_than_tags),
        cmocka_unit_test(psp_is_set_against_the_rarest_given_tags),
        cmocka_unit_test(psndcg_discounts_the_worth_of_each_place),
        cmocka_unit_test(of_many_given_tags_only_the_five_rarest_can_be_attained),
        cmocka_unit_test(fewer_given_tags_than_places_are_all_that_can_be_attained),
        cmocka_unit_test(the_best_list_reaches_every_basis_but_precision_s),
        cmocka_unit_test(an_empty_place_is_a_miss),
        cmocka_unit_test(what_stands_beyond_the_tenth_place_does_not_count),
        cmocka_unit_test(every_figure_has_its_name),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
