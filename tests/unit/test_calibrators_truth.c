/*
 * Whether the chances are those of the truth behind missing tags: every outcome of a pair is
 * enumerated with its probability, over y* (belongs), y (given) and whether a pair not given is
 * examined later; then small numbers, where the average has to be right.
 *
 * Horvitz & Thompson 1952 for pairs that nobody examined. With q = .3 and p = .4, a given pair
 * stands for 2.5; adding what rulings find among half of the others makes it .39 (.3 + .5·.18).
 */
#include "daemon/learner/propensity.h"

#include "tests/unit/calibrators_fixture.h"

/* How a pair comes about. */
struct world {
    double belongs;    /* q */
    double propensity; /* p */
    double examined;   /* the share of pairs not given that is examined later */
    double known;      /* the share of pairs examined when filed */
};

/* One outcome of a pair, `pairs` times. */
static void count_outcome(struct calibrators_cell *cell, bool belongs, bool given, bool examined,
                          double pairs)
{
    cell->pairs += pairs;
    cell->given += given ? pairs : 0.0;
    cell->ruled += !given && examined ? pairs : 0.0;
    cell->ruled_true += !given && examined && belongs ? pairs : 0.0;
}

static double share(bool happens, double probability)
{
    return happens ? probability : 1.0 - probability;
}

/* All outcomes of MANY pairs. */
static void enumerate(struct calibrators *calibrators, size_t bin, size_t tag_class,
                      const struct world *world)
{
    struct calibrators_cell *cell = &calibrators->bins[bin].cells[tag_class];
    double unknown = MANY * (1.0 - world->known);
    cell->known += MANY * world->known;
    cell->known_true += MANY * world->known * world->belongs;
    for (int outcome = 0; outcome < 8; outcome++) {
        bool belongs = (outcome & 1) != 0;
        bool given = (outcome & 2) != 0;
        bool examined = (outcome & 4) != 0;
        double given_share = belongs ? share(given, world->propensity) : given ? 0.0 : 1.0;
        count_outcome(cell, belongs, given, examined,
                      unknown * share(belongs, world->belongs) * given_share *
                          share(examined, world->examined));
    }
}

/* --- nobody, some or all of it examined ---------------------------------------------------------
 */

static void half_of_the_pairs_not_given_examined_leaves_the_chance_as_it_is(void **state)
{
    enumerate(*state, SCORE_BIN, LOW, &(struct world){0.3, 0.4, 0.5, 0.0});
    assert_near(chance_at(*state, SCORE, LOW), 0.30, 1e-6);
}

static void the_chance_is_the_truth_however_much_was_examined(void **state)
{
    static const double shares[] = {0.0, 0.03, 0.25, 0.9, 1.0};
    double propensities[CALIBRATORS_CLASSES];
    usual_propensities(propensities);
    for (size_t c = 0; c <= RARE; c++) {
        for (size_t i = 0; i < 5; i++) {
            for (int percent = 5; percent < 100; percent += 30) {
                double q = percent / 100.0;
                calibrators_init(*state);
                enumerate(*state, SCORE_BIN, c, &(struct world){q, propensities[c], shares[i], 0});
                assert_near(chance_at(*state, SCORE, c), q, 1e-6);
            }
        }
    }
}

static void known_pairs_may_be_mixed_in(void **state)
{
    static const double shares[] = {0.0, 0.5, 1.0};
    for (size_t i = 0; i < 3; i++) {
        calibrators_init(*state);
        enumerate(*state, SCORE_BIN, LOW, &(struct world){0.3, 0.4, shares[i], 0.2});
        assert_near(chance_at(*state, SCORE, LOW), 0.30, 1e-6);
    }
}

/* Two classes of one group, rulings on the rarer one alone. */
static void classes_examined_unlike_each_other_do_not_mix(void **state)
{
    enumerate(*state, SCORE_BIN, LOW, &(struct world){0.3, 0.4, 0.0, 0.0});
    enumerate(*state, SCORE_BIN, LOWER, &(struct world){0.7, 0.32, 0.9, 0.0});
    assert_near(chance_at(*state, SCORE, LOW), 0.50, 1e-6);
}

/* With all examined, a propensity that is wrong does no harm: here .4 in truth .2. */
static void what_was_all_examined_needs_no_propensity(void **state)
{
    enumerate(*state, SCORE_BIN, LOW, &(struct world){0.3, 0.2, 1.0, 0.0});
    assert_near(chance_at(*state, SCORE, LOW), 0.30, 1e-6);
}

/* 60 rulings for what are 30 pairs: half of them found true, so half of the 30. */
static void rulings_stand_for_no_more_pairs_than_there_are(void **state)
{
    struct calibrators *calibrators = *state;
    calibrators->bins[SCORE_BIN].cells[LOW] = (struct calibrators_cell){
        .pairs = 1e9, .given = 0.7e9, .ruled = 0.6e9, .ruled_true = 0.3e9};
    assert_near(chance_at(calibrators, SCORE, LOW), 0.85, 1e-6);
}

/* Half of the pairs are examined three half-lives after they were counted. */
static void late_rulings_count_for_what_their_pairs_still_count(void **state)
{
    struct calibrators *calibrators = *state;
    enumerate(calibrators, SCORE_BIN, LOW, &(struct world){0.3, 0.4, 0.0, 0.0});
    for (int i = 0; i < 30; i++) {
        calibrators_age(calibrators, 10.0);
    }
    double weight = calibrators_weight(30.0, 10.0);
    calibrators_add_ruled(calibrators, SCORE, LOW, weight * 0.5 * 0.18 * MANY, true);
    calibrators_add_ruled(calibrators, SCORE, LOW, weight * 0.5 * 0.70 * MANY, false);
    assert_near(chance_at(calibrators, SCORE, LOW), 0.30, 1e-6);
}

/* A tenth of those that do not belong was given all the same, and a check took them off. */
static void wrongly_given_ones_taken_off_leave_the_truth(void **state)
{
    struct calibrators *calibrators = *state;
    enumerate(calibrators, SCORE_BIN, LOW, &(struct world){0.3, 0.4, 0.5, 0.0});
    struct calibrators_cell *cell = &calibrators->bins[SCORE_BIN].cells[LOW];
    cell->given += 0.07 * MANY;
    cell->ruled -= 0.5 * 0.07 * MANY;
    calibrators_take_off(calibrators, SCORE, LOW, 0.07 * MANY);
    assert_near(chance_at(calibrators, SCORE, LOW), 0.30, 1e-6);
}

/* --- groups -------------------------------------------------------------------------------------
 */

/* The same scores mean .2 for one group and .7 for another; all in one they would mean .45, as they
 * do for a group without evidence. */
static void groups_are_told_apart(void **state)
{
    for (size_t bin = 1; bin < CALIBRATORS_BINS; bin++) {
        enumerate(*state, bin, HALF, &(struct world){0.2, 0.5, 0.0, 0.0});
        enumerate(*state, bin, RARE, &(struct world){0.7, 0.1, 0.0, 0.0});
    }
    assert_near(chance_at(*state, SCORE, HALF), 0.2, 1e-6);
    assert_near(chance_at(*state, SCORE, RARE), 0.7, 1e-6);
    assert_near(chance_at(*state, SCORE, LIKELY), 0.45, 1e-6);
}

/* Three pairs of p = .1 in a bin, one of them given, "stand for" ten of three. The other groups'
 * plenty keeps it sane: it moves by a fraction of what it says. */
static void a_group_with_hardly_any_evidence_keeps_to_the_others(void **state)
{
    for (size_t bin = 1; bin < CALIBRATORS_BINS; bin++) {
        enumerate(*state, bin, HALF, &(struct world){0.2, 0.5, 0.0, 0.0});
    }
    add(*state, SCORE, RARE, 3, 1);
    double chance = chance_at(*state, SCORE, RARE);
    assert_true(chance > 0.2);
    assert_near(chance, 0.2, 0.1);
}

/* By hand: 100 pairs of p = .1, none given, say as much as 10: the pooled curve keeps the weight of
 * 15·101/11 = 137.7 pairs, so .2·137.7/237.7. Were they taken for 100, .2·15/115 = .026. */
static void a_pair_seldom_given_says_as_much_less(void **state)
{
    for (size_t bin = 1; bin < CALIBRATORS_BINS; bin++) {
        enumerate(*state, bin, HALF, &(struct world){0.2, 0.5, 0.0, 0.0});
        add(*state, 0.02 * (double)bin - 0.99, RARE, 100, 0);
    }
    assert_near(chance_at(*state, SCORE, RARE), 0.1158699, 1e-6);
}

/* Tags of one use in a thousand: their class stays as items come in, and what it stands for does
 * not; evidence that was gathered before is read with today's propensity, in today's group. */
static void the_propensity_is_that_of_today(void **state)
{
    static const double documents[] = {1000.0, 76000.0};
    struct propensity_curve curve = propensity_curve_default();
    size_t tag_class = calibrators_class(1, 1000);
    assert_int_equal(calibrators_class(76, 76000), tag_class);
    ((struct calibrators *)*state)->bins[SCORE_BIN].cells[tag_class] =
        (struct calibrators_cell){.pairs = MANY, .given = 0.1 * MANY};
    double last = 0.0;
    for (size_t i = 0; i < 2; i++) {
        double propensities[CALIBRATORS_CLASSES];
        struct calibrators_curves curves;
        for (size_t c = 0; c < CALIBRATORS_CLASSES; c++) {
            double tag_count = calibrators_class_share(c) * documents[i];
            propensities[c] = propensity_of_curve(&curve, tag_count, documents[i]);
        }
        calibrators_fit(*state, propensities, NO_LEAST, &curves);
        double today = propensities[tag_class];
        assert_true(today > last + 0.1);
        assert_near(calibrators_chance(&curves, today, SCORE), 0.1 / today, 1e-5);
        last = today;
    }
    assert_int_equal(calibrators_group(last), 1); /* .39 */
}

/* --- curves -------------------------------------------------------------------------------------
 */

static void the_chance_rises_with_the_score_whatever_the_evidence(void **state)
{
    struct repeatable random = {4};
    for (int time = 0; time < 50; time++) {
        struct calibrators_curves curves;
        calibrators_init(*state);
        for (int i = 0; i < 200; i++) {
            double score = 2.8 * repeatable_share(&random) - 1.1;
            size_t c = repeatable_below(&random, RARE + 1);
            int pairs = (int)repeatable_below(&random, 40);
            add(*state, score, c, pairs, (int)repeatable_below(&random, (uint32_t)pairs + 1));
            calibrators_add_ruled(*state, score, c, 1.0, i % 3 == 0);
        }
        fit(*state, &curves);
        check_rising(&curves);
    }
}

static void a_chance_is_never_above_one(void **state)
{
    struct calibrators_curves curves;
    add(*state, SCORE, HALF, 1000, 1000); /* stand for 2,000 of 1,000 */
    fit(*state, &curves);
    check_rising(&curves);
    assert_near(calibrators_chance(&curves, 0.5, 1.0), 1.0, 1e-12);
}

/* Chance makes one bin 1.4 and the next .4; together they are .9, as many as there are. Cutting the
 * first to 1 beforehand would lose true pairs: .7. */
static void a_bin_that_came_out_above_one_is_pooled_before_it_is_cut(void **state)
{
    struct calibrators *calibrators = *state;
    calibrators->bins[SCORE_BIN].cells[HALF] =
        (struct calibrators_cell){.pairs = MANY, .given = 0.7 * MANY};
    calibrators->bins[SCORE_BIN + 1].cells[HALF] =
        (struct calibrators_cell){.pairs = MANY, .given = 0.2 * MANY};
    assert_near(chance_at(calibrators, SCORE, HALF), 0.9, 1e-6);
    assert_near(chance_at(calibrators, SCORE + 0.02, HALF), 0.9, 1e-6);
}

/* --- few pairs ----------------------------------------------------------------------------------
 */

/* One pair of the world, by chance. */
static void add_by_chance(struct calibrators *calibrators, double score, size_t tag_class,
                          const struct world *world, struct repeatable *random)
{
    bool belongs = repeatable_share(random) < world->belongs;
    bool given = repeatable_share(random) < world->propensity && belongs;
    bool examined = repeatable_share(random) < world->examined;
    calibrators_add_pair(calibrators, score, tag_class);
    if (given) {
        calibrators_add_given(calibrators, score, tag_class);
    } else if (examined) {
        calibrators_add_ruled(calibrators, score, tag_class, 1.0, belongs);
    }
}

/*
 * The mean of the curve when each of 22 classes of p = .4 has `pairs` pairs in each bin above the
 * floor. Isotonic regression keeps the mean, and here the pull of the prior is the same whatever
 * has been examined.
 */
static double mean_of_small_cells(struct calibrators *calibrators, int pairs, double examined)
{
    enum {
        TIMES = 60
    };
    struct repeatable random = {31};
    const struct world world = {0.3, 0.4, examined, 0.0};
    double propensities[CALIBRATORS_CLASSES];
    double sum = 0.0;
    for (size_t c = 0; c < CALIBRATORS_CLASSES; c++) {
        propensities[c] = world.propensity;
    }
    for (int time = 0; time < TIMES; time++) {
        struct calibrators_curves curves;
        calibrators_init(calibrators);
        for (int i = 0; i < (CALIBRATORS_BINS - 1) * CALIBRATORS_CLASSES * pairs; i++) {
            double score = -0.97 + 0.02 * (i % (CALIBRATORS_BINS - 1));
            size_t tag_class = (size_t)(i / (CALIBRATORS_BINS - 1) % CALIBRATORS_CLASSES);
            add_by_chance(calibrators, score, tag_class, &world, &random);
        }
        calibrators_fit(calibrators, propensities, NO_LEAST, &curves);
        for (size_t b = 1; b < CALIBRATORS_BINS; b++) {
            sum += curves.groups[1].chance[b];
        }
    }
    return sum / (TIMES * (CALIBRATORS_BINS - 1));
}

/* A cell of one pair has nothing left to examine when that pair is given: if λ were 0 then, cells
 * of one would be .39 on the average, the double count in full. */
static void cells_of_few_pairs_are_not_counted_twice(void **state)
{
    for (int pairs = 1; pairs <= 2; pairs++) {
        double without = mean_of_small_cells(*state, pairs, 0.0);
        assert_near(mean_of_small_cells(*state, pairs, 0.5), without, 0.004);
        assert_near(mean_of_small_cells(*state, pairs, 1.0), without, 0.004);
    }
}

/* With few pairs and q near 1, chance alone carries many bins' y/p above 1. The mean of the curve
 * is still q: what is too much in one bin makes up for what is too little in the next. */
static void chances_near_one_are_not_too_low_on_the_average(void **state)
{
    enum {
        TIMES = 200,
        FIRST_BIN = 50,
        LAST_BIN = 99,
        PAIRS = 60
    };
    struct repeatable random = {21};
    double sum = 0.0;
    for (int time = 0; time < TIMES; time++) {
        struct calibrators_curves curves;
        calibrators_init(*state);
        for (int i = 0; i < PAIRS * (LAST_BIN - FIRST_BIN + 1); i++) {
            int bin = FIRST_BIN + i / PAIRS;
            double score = 0.02 * bin - 0.99;
            add_by_chance(*state, score, HALF, &(struct world){0.9, 0.5, 0.0, 0.0}, &random);
        }
        fit(*state, &curves);
        for (int bin = FIRST_BIN; bin <= LAST_BIN; bin++) {
            sum += curves.groups[2].chance[bin];
        }
    }
    assert_near(sum / (TIMES * (LAST_BIN - FIRST_BIN + 1)), 0.9, 0.005);
}

/* True chances (1 + s)/2 for one group and half of that for the other, some rulings in both: each
 * curve finds its own. */
static void two_known_truths_are_found_behind_missing_tags(void **state)
{
    enum {
        PAIRS = 400000
    };
    struct repeatable random = {20};
    struct calibrators_curves curves;
    for (int i = 0; i < PAIRS; i++) {
        double score = 2.0 * repeatable_share(&random) - 1.0;
        struct world world = {(1.0 + score) / 2.0, 0.8, 0.1, 0.0};
        if (i % 2 == 0) {
            world = (struct world){(1.0 + score) / 4.0, 0.4, 0.3, 0.0};
        }
        add_by_chance(*state, score, i % 2 == 0 ? LOW : LIKELY, &world, &random);
    }
    fit(*state, &curves);
    double error_likely = 0.0;
    double error_low = 0.0;
    for (int i = -95; i <= 95; i++) {
        double truth = (1.0 + i / 100.0) / 2.0;
        error_likely += fabs(calibrators_chance(&curves, 0.8, i / 100.0) - truth) / 191.0;
        error_low += fabs(calibrators_chance(&curves, 0.4, i / 100.0) - truth / 2.0) / 191.0;
    }
    assert_near(error_likely, 0.0, 0.01);
    assert_near(error_low, 0.0, 0.01);
    assert_false(calibrators_early(&curves));
}

int main(void)
{
#define calibrators_test(name) cmocka_unit_test_setup(name, set_up)
    const struct CMUnitTest tests[] = {
        calibrators_test(half_of_the_pairs_not_given_examined_leaves_the_chance_as_it_is),
        calibrators_test(the_chance_is_the_truth_however_much_was_examined),
        calibrators_test(known_pairs_may_be_mixed_in),
        calibrators_test(classes_examined_unlike_each_other_do_not_mix),
        calibrators_test(what_was_all_examined_needs_no_propensity),
        calibrators_test(rulings_stand_for_no_more_pairs_than_there_are),
        calibrators_test(late_rulings_count_for_what_their_pairs_still_count),
        calibrators_test(wrongly_given_ones_taken_off_leave_the_truth),
        calibrators_test(groups_are_told_apart),
        calibrators_test(a_group_with_hardly_any_evidence_keeps_to_the_others),
        calibrators_test(a_pair_seldom_given_says_as_much_less),
        calibrators_test(the_propensity_is_that_of_today),
        calibrators_test(the_chance_rises_with_the_score_whatever_the_evidence),
        calibrators_test(a_chance_is_never_above_one),
        calibrators_test(a_bin_that_came_out_above_one_is_pooled_before_it_is_cut),
        calibrators_test(cells_of_few_pairs_are_not_counted_twice),
        calibrators_test(chances_near_one_are_not_too_low_on_the_average),
        calibrators_test(two_known_truths_are_found_behind_missing_tags),
    };
    return cmocka_run_group_tests_name("calibrators_truth", tests, NULL, NULL);
}
