/*
 * Chances calibrated by what an item's other tags promise: how they look, fade
 * and are stored.
 */
#include "tests/unit/agreement_fixture.h"

/* --- without evidence
 * ---------------------------------------------------------------------------
 */

static const double SUREST = 0.99; /* the greatest chance */

static const double PROMISES[] = {0.0, 0.1, 0.2, 0.3, 0.8, 1.1, 3.25, 6.0, 10.0, 40.0};

enum {
    PROMISE_COUNT = sizeof PROMISES / sizeof PROMISES[0]
};

static void without_evidence_the_middle_of_a_cell_comes_out_as_it_went_in(void **state)
{
    for (size_t i = 0; i < PROMISE_COUNT; i++) {
        for (size_t c = 0; c < AGREEMENT_CHANCES; c++) {
            double chance = middle_of(c);
            assert_near(agreement_chance(*state, PROMISES[i], chance), fmin(chance, SUREST), 1e-14);
        }
    }
}

/* A straight line instead of the logistic curve: off by at most
 * width²/8·max|σ''| = .25/8·.0962 = .0030. */
static void without_evidence_any_chance_comes_out_nearly_as_it_went_in(void **state)
{
    for (size_t i = 0; i < PROMISE_COUNT; i++) {
        for (int c = 0; c <= 1000; c++) {
            double chance = c / 1000.0;
            /* The last cell comes out as .99, so that the line towards it is off by a half of .0068
             * more, and what lies beyond it by .01. */
            double tolerance = chance > 0.98 ? 0.0101 : 0.0031;
            assert_near(agreement_chance(*state, PROMISES[i], chance), chance, tolerance);
        }
    }
}

/* Below the first middle, .0032, even 1 in a million keeps its size. */
static void without_evidence_small_chances_keep_their_size(void **state)
{
    for (int decade = 3; decade <= 8; decade++) {
        double chance = pow(10.0, -decade);
        assert_near(agreement_chance(*state, 1.0, chance) / chance, 1.0, 1e-12);
    }
}

/* --- how it looks
 * -------------------------------------------------------------------------------
 */

static void the_chance_rises_with_the_one_that_went_in(void **state)
{
    struct repeatable random = {3};
    add_anything(*state, &random, 20000);
    agreement_fit(*state);
    for (size_t i = 0; i < PROMISE_COUNT; i++) {
        double last = 0.0;
        for (int step = -9000; step <= 9000; step++) {
            double chance = agreement_chance(*state, PROMISES[i], chance_of_logit(step / 1000.0));
            assert_true(chance >= last - 1e-12 && chance <= 1.0);
            last = chance;
        }
        assert_true(last > 0.1);
    }
}

/* Neighbouring cells differ by 1 at most, over .5 of the logit: at most .002 in
 * a step of .001. */
static void there_is_no_jump_as_the_chance_rises(void **state)
{
    struct repeatable random = {4};
    add_anything(*state, &random, 20000);
    agreement_fit(*state);
    for (size_t i = 0; i < PROMISE_COUNT; i++) {
        double last = agreement_chance(*state, PROMISES[i], 0.0);
        for (int step = -12000; step <= 12000; step++) {
            double chance = agreement_chance(*state, PROMISES[i], chance_of_logit(step / 1000.0));
            assert_near(chance, last, 0.0021);
            last = chance;
        }
        assert_near(agreement_chance(*state, PROMISES[i], 1.0), last, 1e-9);
    }
}

/* Rows differ by 1 at most, over a promise of .2 or more: at most .005 in a
 * step of .001. */
static void there_is_no_jump_as_the_promise_rises(void **state)
{
    struct repeatable random = {5};
    add_anything(*state, &random, 20000);
    agreement_fit(*state);
    for (int c = 1; c < 20; c++) {
        double last = agreement_chance(*state, 0.0, c / 20.0);
        for (int step = 0; step <= 12000; step++) {
            double chance = agreement_chance(*state, step / 1000.0, c / 20.0);
            assert_near(chance, last, 0.0051);
            last = chance;
        }
    }
}

static void rows_are_told_apart(void **state)
{
    double chance = middle_of(MIDDLE_CELL);
    add_not_given(*state, MUCH_PROMISED, chance, PAIRS);
    add_not_given(*state, NOTHING_PROMISED, chance, PAIRS / 10);
    add_given(*state, NOTHING_PROMISED, chance, 0.5, PAIRS / 11);
    agreement_fit(*state);
    assert_near(agreement_chance(*state, MUCH_PROMISED, chance), 0.0, 1e-3);
    assert_near(agreement_chance(*state, NOTHING_PROMISED, chance), 10.0 / 11.0, 3e-3);
    assert_near(agreement_chance(*state, SOMETHING_PROMISED, chance), chance, 1e-12);
}

/* Half way between the rows of 3.25 and 5: half of each. */
static void between_two_rows_the_chance_lies_between_theirs(void **state)
{
    double chance = middle_of(MIDDLE_CELL);
    add_throughout(*state, MUCH_PROMISED, 60); /* 20/80: a quarter */
    agreement_fit(*state);
    assert_near(agreement_chance(*state, 3.25, chance), chance, 1e-12);
    assert_near(agreement_chance(*state, 4.125, chance), 0.625 * chance, 1e-12);
    assert_near(agreement_chance(*state, 5.0, chance), 0.25 * chance, 1e-12);
    assert_near(agreement_chance(*state, 6.0, chance), 0.625 * chance, 1e-12); /* the next is 7 */
}

/* Evidence goes to the nearest row: 4.1 to that of 3.25, 4.2 to that of 5. */
static void evidence_goes_to_the_nearest_row_and_cell(void **state)
{
    struct agreement *agreement = *state;
    agreement_add_not_given(agreement, 4.1, chance_of_logit(0.49));
    agreement_add_not_given(agreement, 4.2, chance_of_logit(0.51));
    agreement_add_given(agreement, 4.2, chance_of_logit(0.01), 0.25);
    assert_near(agreement->rows[MUCH_ROW - 1].cells[MIDDLE_CELL].not_given, 1.0, 1e-12);
    assert_near(agreement->rows[MUCH_ROW].cells[MIDDLE_CELL + 1].not_given, 1.0, 1e-12);
    assert_near(agreement->rows[MUCH_ROW].cells[MIDDLE_CELL].hidden, 3.0, 1e-12);
}

/* By hand: 80 pairs of logit .25, none given, 20·.5622/100 = .1124; the cells
 * below, without evidence, have .4378, .3208, .2227, .1480 and less. All down
 * to .2227 are pooled with it: (100·.1124 + 20·(.4378 + .3208 + .2227))/160 =
 * .1929, above .1480. */
static void what_falls_below_its_neighbours_is_pooled_with_them(void **state)
{
    add_not_given(*state, MUCH_PROMISED, middle_of(MIDDLE_CELL), 80);
    agreement_fit(*state);
    double pooled = agreement_chance(*state, MUCH_PROMISED, middle_of(MIDDLE_CELL));
    assert_near(pooled, 0.19294, 1e-5);
    assert_near(agreement_chance(*state, MUCH_PROMISED, middle_of(MIDDLE_CELL - 3)), pooled, 1e-12);
    assert_near(agreement_chance(*state, MUCH_PROMISED, middle_of(MIDDLE_CELL - 4)),
                middle_of(MIDDLE_CELL - 4), 1e-12);
}

static void evidence_takes_effect_with_the_next_fit(void **state)
{
    double chance = middle_of(MIDDLE_CELL);
    add_not_given(*state, MUCH_PROMISED, chance, 60);
    assert_near(agreement_chance(*state, MUCH_PROMISED, chance), chance, 1e-12);
    agreement_fit(*state);
    assert_true(agreement_chance(*state, MUCH_PROMISED, chance) < 0.5 * chance);
}

/* --- little evidence
 * ----------------------------------------------------------------------------
 */

/* 20 pairs' worth of what was believed: 20·.5622/21 and (20·.5622 + 1)/20. */
static void a_lone_pair_moves_a_cell_little(void **state)
{
    double chance = middle_of(MIDDLE_CELL);
    agreement_add_not_given(*state, MUCH_PROMISED, chance);
    agreement_fit(*state);
    assert_near(agreement_chance(*state, MUCH_PROMISED, chance), chance * 20.0 / 21.0, 1e-12);
    agreement_init(*state);
    agreement_add_given(*state, MUCH_PROMISED, chance, 0.5);
    agreement_fit(*state);
    assert_near(agreement_chance(*state, MUCH_PROMISED, chance), chance + 0.05, 1e-12);
}

/* Given pairs of a small p stand for more than there are. */
static void nobody_is_quite_sure(void **state)
{
    double chance = middle_of(MIDDLE_CELL);
    add_given(*state, MUCH_PROMISED, chance, 0.01, 100);
    agreement_fit(*state);
    for (int c = 0; c <= 100; c++) {
        assert_true(agreement_chance(*state, MUCH_PROMISED, c / 100.0) <= SUREST);
    }
    assert_near(agreement_chance(*state, MUCH_PROMISED, chance), SUREST, 1e-12);
}

/* --- extremes
 * -----------------------------------------------------------------------------------
 */

static void a_chance_of_nothing_stays_nothing(void **state)
{
    add_given(*state, MUCH_PROMISED, 0.0, 0.5, 100);
    agreement_fit(*state);
    assert_true(agreement_chance(*state, MUCH_PROMISED, 0.0) == 0.0);
    assert_true(agreement_chance(*state, NOTHING_PROMISED, 0.0) == 0.0);
}

static void a_chance_of_one_is_evidence_of_the_last_cell(void **state)
{
    struct agreement *agreement = *state;
    add_not_given(agreement, MUCH_PROMISED, 1.0, 60);
    assert_near(agreement->rows[MUCH_ROW].cells[AGREEMENT_CHANCES - 1].not_given, 60.0, 1e-12);
    agreement_fit(agreement);
    assert_true(agreement_chance(agreement, MUCH_PROMISED, 1.0) < 0.95);
}

static void a_chance_of_nothing_is_evidence_of_the_first_cell(void **state)
{
    struct agreement *agreement = *state;
    agreement_add_not_given(agreement, MUCH_PROMISED, 0.0);
    assert_near(agreement->rows[MUCH_ROW].cells[0].not_given, 1.0, 1e-12);
}

/* A sum less one of its parts may come out a little below nothing. */
static void a_promise_just_below_nothing_is_nothing(void **state)
{
    struct agreement *agreement = *state;
    double chance = middle_of(MIDDLE_CELL);
    add_not_given(agreement, -1e-16, chance, 60);
    assert_near(agreement->rows[0].cells[MIDDLE_CELL].not_given, 60.0, 1e-12);
    agreement_fit(agreement);
    assert_true(agreement_chance(agreement, -1e-16, chance) ==
                agreement_chance(agreement, 0.0, chance));
}

static void promises_beyond_the_last_row_are_of_the_last_row(void **state)
{
    struct agreement *agreement = *state;
    double chance = middle_of(MIDDLE_CELL);
    add_throughout(agreement, 1e6, 60);
    assert_near(agreement->rows[AGREEMENT_PROMISES - 1].cells[MIDDLE_CELL].not_given, 60.0, 1e-12);
    agreement_fit(agreement);
    assert_near(agreement_chance(agreement, 1e9, chance), 0.25 * chance, 1e-12);
    assert_near(agreement_chance(agreement, 10.0, chance), 0.25 * chance, 1e-12);
}

/* --- fading
 * -------------------------------------------------------------------------------------
 */

/* 20·2^3 pairs three half-lives ago weigh 20: half of what was believed is
 * left. */
static void older_evidence_counts_less(void **state)
{
    double chance = middle_of(MIDDLE_CELL);
    add_throughout(*state, MUCH_PROMISED, 160);
    for (int i = 0; i < 30; i++) {
        agreement_age(*state, 10.0);
    }
    agreement_fit(*state);
    assert_near(agreement_chance(*state, MUCH_PROMISED, chance), 0.5 * chance, 1e-9);
}

/* 80 given ones of p = .5 stand for 80 hidden; three half-lives later for 10,
 * beside 20 new ones: (10 + 20·chance)/40. */
static void given_pairs_fade_as_those_not_given_do(void **state)
{
    double chance = middle_of(MIDDLE_CELL);
    add_given(*state, MUCH_PROMISED, chance, 0.5, 80);
    for (int i = 0; i < 30; i++) {
        agreement_age(*state, 10.0);
    }
    add_not_given(*state, MUCH_PROMISED, chance, 20);
    agreement_fit(*state);
    assert_near(agreement_chance(*state, MUCH_PROMISED, chance), 0.25 + 0.5 * chance, 1e-9);
}

/* Half of what there was and 18 hidden of 30 new pairs with every item; the
 * gain starts anew after 40, when it would be 2^40, above 1e12. */
static void the_gain_starting_anew_changes_no_chance(void **state)
{
    struct agreement *agreement = *state;
    double chance = middle_of(MIDDLE_CELL);
    double hidden = 0.0;
    double not_given = 0.0;
    int starts = 0;
    for (int item = 0; item < 100; item++) {
        double last = agreement->gain;
        agreement_age(agreement, 1.0);
        starts += agreement->gain < last ? 1 : 0;
        add_given(agreement, MUCH_PROMISED, chance, 0.5, 18);
        add_not_given(agreement, MUCH_PROMISED, chance, 30);
        hidden = hidden / 2.0 + 18.0;
        not_given = not_given / 2.0 + 30.0;
        agreement_fit(agreement);
        double expected = (hidden + LEAN * chance) / (not_given + LEAN);
        assert_near(agreement_chance(agreement, MUCH_PROMISED, chance), expected, 1e-9);
    }
    assert_int_equal(starts, 2);
}

/* --- the store
 * ----------------------------------------------------------------------------------
 */

/* Row by row and the gain, as the store keeps them. */
static void restore(const struct agreement *from, struct agreement *to)
{
    memset(to, 0xff, sizeof *to);
    memcpy(&to->gain, &from->gain, sizeof to->gain);
    for (size_t r = 0; r < AGREEMENT_PROMISES; r++) {
        memcpy(&to->rows[r], &from->rows[r], sizeof to->rows[r]);
    }
}

/* Not fitted since the last evidence: that is restored as it was too. */
static void restored_it_goes_on_the_same_bit_by_bit(void **state)
{
    struct agreement *agreement = *state;
    static struct agreement restored;
    struct repeatable random = {6};
    add_anything(agreement, &random, 5000);
    agreement_age(agreement, 3.0);
    agreement_fit(agreement);
    add_anything(agreement, &random, 5000);
    restore(agreement, &restored);
    assert_true(agreement_chance(&restored, 1.7, 0.3) == agreement_chance(agreement, 1.7, 0.3));
    struct repeatable again = random;
    for (int item = 0; item < 150; item++) {
        agreement_age(agreement, 3.0);
        agreement_age(&restored, 3.0);
        add_anything(agreement, &random, 20);
        add_anything(&restored, &again, 20);
    }
    agreement_fit(agreement);
    agreement_fit(&restored);
    assert_memory_equal(&restored, agreement, sizeof restored);
}

static void rows_are_numbers_and_nothing_else(void **state)
{
    (void)state;
    assert_int_equal(sizeof(struct agreement_row), 3 * AGREEMENT_CHANCES * sizeof(double));
    assert_int_equal(sizeof(struct agreement),
                     sizeof(double) + AGREEMENT_PROMISES * sizeof(struct agreement_row));
}

int main(void)
{
#define agreement_test(name) cmocka_unit_test_setup(name, set_up)
    const struct CMUnitTest tests[] = {
        agreement_test(without_evidence_the_middle_of_a_cell_comes_out_as_it_went_in),
        agreement_test(without_evidence_any_chance_comes_out_nearly_as_it_went_in),
        agreement_test(without_evidence_small_chances_keep_their_size),
        agreement_test(the_chance_rises_with_the_one_that_went_in),
        agreement_test(there_is_no_jump_as_the_chance_rises),
        agreement_test(there_is_no_jump_as_the_promise_rises),
        agreement_test(rows_are_told_apart),
        agreement_test(between_two_rows_the_chance_lies_between_theirs),
        agreement_test(evidence_goes_to_the_nearest_row_and_cell),
        agreement_test(what_falls_below_its_neighbours_is_pooled_with_them),
        agreement_test(evidence_takes_effect_with_the_next_fit),
        agreement_test(a_lone_pair_moves_a_cell_little),
        agreement_test(nobody_is_quite_sure),
        agreement_test(a_chance_of_nothing_stays_nothing),
        agreement_test(a_chance_of_one_is_evidence_of_the_last_cell),
        agreement_test(a_chance_of_nothing_is_evidence_of_the_first_cell),
        agreement_test(a_promise_just_below_nothing_is_nothing),
        agreement_test(promises_beyond_the_last_row_are_of_the_last_row),
        agreement_test(older_evidence_counts_less),
        agreement_test(given_pairs_fade_as_those_not_given_do),
        agreement_test(the_gain_starting_anew_changes_no_chance),
        agreement_test(restored_it_goes_on_the_same_bit_by_bit),
        agreement_test(rows_are_numbers_and_nothing_else),
    };
    return cmocka_run_group_tests_name("agreement", tests, NULL, NULL);
}
