/*
 * Chances calibrated by what an item's other tags promise. A true pair is given
 * with p or hidden with 1 - p, whatever the others are: every outcome is
 * enumerated with its probability, and the chance must be the truth (Horvitz &
 * Thompson 1952); then an invented desk, of which some items' words mislead,
 * where chances worked out pair by pair are wrong.
 */
#include "tests/unit/agreement_fixture.h"

/* --- the truth by enumeration
 * -------------------------------------------------------------------
 */

/* Pairs of one propensity: each of the three outcomes as often as it is
 * probable. */
static void enumerate(struct agreement *agreement, double belongs, double p)
{
    double chance = middle_of(MIDDLE_CELL);
    add_given(agreement, SOMETHING_PROMISED, chance, p, times(belongs * p));
    add_not_given(agreement, SOMETHING_PROMISED, chance, times(belongs * (1.0 - p)));
    add_not_given(agreement, SOMETHING_PROMISED, chance, times(1.0 - belongs));
}

static void given_pairs_stand_for_as_many_as_are_hidden(void **state)
{
    static const double propensities[] = {1.0, 0.8, 0.5, 0.2, 0.05};
    for (size_t i = 0; i < 5; i++) {
        struct agreement *agreement = *state;
        double p = propensities[i];
        agreement_init(agreement);
        enumerate(agreement, 0.3, p);
        const struct agreement_cell *cell = &agreement->rows[SOMETHING_ROW].cells[MIDDLE_CELL];
        assert_near(cell->hidden, PAIRS * 0.3 * (1.0 - p), 1e-4);
        assert_near(cell->not_given, PAIRS * (1.0 - 0.3 * p), 1e-4);
    }
}

/* By hand: hidden are .5·(1 - p) of each kind, .1 + .25 + .4 = .75, of .6 + .75
 * + .9 = 2.25 not given: a third of them. */
static void propensities_may_be_mixed(void **state)
{
    enumerate(*state, 0.5, 0.8);
    enumerate(*state, 0.5, 0.5);
    enumerate(*state, 0.5, 0.2);
    agreement_fit(*state);
    double chance = agreement_chance(*state, SOMETHING_PROMISED, middle_of(MIDDLE_CELL));
    assert_near(chance, 1.0 / 3.0, 1e-4);
}

/* Of a pair by which of its own was given, in view of whether the other one
 * was. */
static void add_one_of_two(struct agreement *agreement, bool is_given, bool is_other_given,
                           double p, long pairs)
{
    double promise = is_other_given ? NOTHING_PROMISED : SOMETHING_PROMISED;
    if (is_given) {
        add_given(agreement, promise, middle_of(MIDDLE_CELL), p, pairs);
    } else {
        add_not_given(agreement, promise, middle_of(MIDDLE_CELL), pairs);
    }
}

/* Two pairs of an item belong with .2 each where its words mislead, else with
 * .8; p = .5. */
static void enumerate_two(struct agreement *agreement)
{
    static const double belongs[2] = {0.2, 0.8};
    for (int outcome = 0; outcome < 8; outcome++) {
        double of_both = 0.5;
        bool first = (outcome & 2) != 0;
        bool second = (outcome & 4) != 0;
        double given = 0.5 * belongs[outcome & 1];
        of_both *= first ? given : 1.0 - given;
        of_both *= second ? given : 1.0 - given;
        add_one_of_two(agreement, first, second, 0.5, times(of_both));
        add_one_of_two(agreement, second, first, 0.5, times(of_both));
    }
}

/*
 * By hand. Pair by pair: belongs with .5, so .25 of .75 not given are missing:
 * a third. With the other one given too (with .1, .4 of the misleading and of
 * the other items): missing (.1·.1 + .4·.4)/2 = .085 of (.1·.9 + .4·.6)/2 =
 * .165 not given: .515; and with that one not given either (.9, .6): missing
 * (.9·.1 + .6·.4)/2 = .165 of (.9·.9 + .6·.6)/2 = .585 not given: .282.
 */
static void pairs_that_hang_together_come_out_true_in_view_of_each_other(void **state)
{
    enumerate_two(*state);
    agreement_fit(*state);
    double chance = middle_of(MIDDLE_CELL);
    assert_near(agreement_chance(*state, NOTHING_PROMISED, chance), 0.085 / 0.165, 1e-4);
    assert_near(agreement_chance(*state, SOMETHING_PROMISED, chance), 0.165 / 0.585, 1e-4);
}

/* Complete tags: p = 1, and nothing is missing whatever was believed. */
static void where_every_true_pair_is_given_nothing_is_missing(void **state)
{
    enumerate(*state, 0.5, 1.0);
    agreement_fit(*state);
    double chance = agreement_chance(*state, SOMETHING_PROMISED, middle_of(MIDDLE_CELL));
    assert_near(chance, 0.0, 1e-3);
}

/* --- an invented desk
 * ---------------------------------------------------------------------------
 */

enum {
    PROPOSED = 14 /* tags proposed for an item */
};

/* What is proposed for an item: each tag belongs with `belongs` in the mean
 * over items, which is the calibrators' word for it; with less where the words
 * mislead, with more where not. */
struct proposed {
    double propensity[PROPOSED];
    double missing[PROPOSED]; /* pair by pair: q(1 - p)/(1 - qp) */
    bool given[PROPOSED];
    bool hidden[PROPOSED];
    double promise; /* of all not given */
};

static void propose(struct proposed *item, struct repeatable *random)
{
    bool misled = repeatable_share(random) < 0.5;
    item->promise = 0.0;
    for (size_t i = 0; i < PROPOSED; i++) {
        double p = 0.2 + 0.6 * repeatable_share(random);
        double q = 0.35 + 0.6 * repeatable_share(random);
        double swing = 0.9 * fmin(q, 1.0 - q);
        bool belongs = repeatable_share(random) < (misled ? q - swing : q + swing);
        item->propensity[i] = p;
        item->missing[i] = q * (1.0 - p) / (1.0 - q * p);
        item->given[i] = repeatable_share(random) < p && belongs;
        item->hidden[i] = belongs && !item->given[i];
        item->promise += item->given[i] ? 0.0 : item->missing[i];
    }
}

static void learn(struct agreement *agreement, const struct proposed *item)
{
    for (size_t i = 0; i < PROPOSED; i++) {
        double chance = item->missing[i];
        if (item->given[i]) {
            agreement_add_given(agreement, item->promise, chance, item->propensity[i]);
        } else {
            agreement_add_not_given(agreement, item->promise - chance, chance);
        }
    }
}

static void learn_desk(struct agreement *agreement, int items)
{
    struct repeatable random = {1};
    for (int i = 0; i < items; i++) {
        struct proposed item;
        propose(&item, &random);
        learn(agreement, &item);
    }
    agreement_fit(agreement);
}

/* Sums over items, of which each is drawn anew, so that their spread gives the
 * standard error. */
struct compared {
    double pairs;
    double pair_by_pair; /* chances less what was hidden */
    double calibrated;
    double squares; /* of the latter's sum of an item */
};

/* Over gaps whose chance pair by pair is in [low, high), and whose others
 * promise so much. */
struct range {
    double chance[2];
    double promise[2];
};

static bool is_within(const double range[2], double value)
{
    return value >= range[0] && value < range[1];
}

static void compare_item(const struct agreement *agreement, const struct proposed *item,
                         const struct range *range, struct compared *sums)
{
    double off = 0.0;
    for (size_t i = 0; i < PROPOSED; i++) {
        double chance = item->missing[i];
        double promise = item->promise - chance;
        if (!item->given[i] && is_within(range->chance, chance) &&
            is_within(range->promise, promise)) {
            double truth = item->hidden[i] ? 1.0 : 0.0;
            sums->pairs += 1.0;
            sums->pair_by_pair += chance - truth;
            off += agreement_chance(agreement, promise, chance) - truth;
        }
    }
    sums->calibrated += off;
    sums->squares += off * off;
}

/* Items that were not learned from. */
static struct compared compare(const struct agreement *agreement, const struct range *range)
{
    struct repeatable random = {2};
    struct compared sums = {0};
    for (int i = 0; i < 40000; i++) {
        struct proposed item;
        propose(&item, &random);
        compare_item(agreement, &item, range, &sums);
    }
    return sums;
}

/* Four standard errors, of what is compared and of what was learned from as
 * many, and .04 for the rows: here the truth falls steeply with the promise,
 * and a row is over 1 wide. */
static void check_calibrated(const struct compared *sums)
{
    double error = sqrt(2.0 * sums->squares) / sums->pairs;
    assert_true(sums->pairs > 5000.0);
    assert_true(error < 0.01);
    assert_near(sums->calibrated / sums->pairs, 0.0, 4.0 * error + 0.04);
}

static void where_much_is_promised_chances_pair_by_pair_are_too_high_at_the_top(void **state)
{
    learn_desk(*state, 40000);
    struct compared sums = compare(*state, &(struct range){{0.6, 1.0}, {5.0, 100.0}});
    assert_true(sums.pair_by_pair / sums.pairs > 0.1);
    check_calibrated(&sums);
}

static void where_little_is_promised_chances_pair_by_pair_are_too_low(void **state)
{
    learn_desk(*state, 40000);
    struct compared sums = compare(*state, &(struct range){{0.2, 1.0}, {0.0, 2.6}});
    assert_true(sums.pair_by_pair / sums.pairs < -0.1);
    check_calibrated(&sums);
}

static void calibrated_chances_are_near_the_truth_in_every_part(void **state)
{
    static const double chances[] = {0.1, 0.5, 1.0};
    static const double promises[] = {0.0, 2.6, 4.1, 6.0, 100.0};
    learn_desk(*state, 40000);
    for (size_t part = 0; part < 8; part++) {
        size_t c = part % 2;
        size_t r = part / 2;
        struct compared sums = compare(
            *state, &(struct range){{chances[c], chances[c + 1]}, {promises[r], promises[r + 1]}});
        check_calibrated(&sums);
        assert_true(fabs(sums.calibrated) < 0.5 * fabs(sums.pair_by_pair));
    }
}

int main(void)
{
#define agreement_test(name) cmocka_unit_test_setup(name, set_up)
    const struct CMUnitTest tests[] = {
        agreement_test(given_pairs_stand_for_as_many_as_are_hidden),
        agreement_test(propensities_may_be_mixed),
        agreement_test(pairs_that_hang_together_come_out_true_in_view_of_each_other),
        agreement_test(where_every_true_pair_is_given_nothing_is_missing),
        agreement_test(where_much_is_promised_chances_pair_by_pair_are_too_high_at_the_top),
        agreement_test(where_little_is_promised_chances_pair_by_pair_are_too_low),
        agreement_test(calibrated_chances_are_near_the_truth_in_every_part),
    };
    return cmocka_run_group_tests_name("agreement_truth", tests, NULL, NULL);
}
