/*
 * The curve fitted to checks. Evidence is made from a known p without chance: of n true pairs with
 * m others, n·p(m) are given (read at the count m + 1) and the rest hidden (read at m).
 */
#include "daemon/learner/propensity_fit.h"

#include <string.h>

#include "tests/unit/near.h"

enum {
    COUNTS = 16,
    EVIDENCE = 20000
};

static const double DOCUMENTS = 76000.0;

struct fixture {
    struct propensity_curve curve;
    struct propensity_fit none; /* the default fit */
    struct propensity_fit fit;
    size_t count; /* of the evidence */
    struct propensity_evidence evidence[EVIDENCE];
};

static int set_up(void **state)
{
    static struct fixture fixture;
    memset(&fixture, 0, sizeof fixture);
    fixture.curve = propensity_curve_default();
    propensity_fit_default(&fixture.curve, &fixture.none);
    *state = &fixture;
    return 0;
}

static double others_of(size_t i)
{
    return ldexp(1.0, (int)i);
}

/* Tags tried once each (so that no tag is told apart from the curve), and a fraction for the rest.
 */
static void add(struct fixture *f, double tag_count, double trials, double given_share)
{
    size_t tags = (size_t)ceil(trials);
    for (size_t i = 0; i < tags; i++) {
        double part = fmin(trials - (double)i, 1.0);
        assert_true(f->count < EVIDENCE);
        f->evidence[f->count++] = (struct propensity_evidence){tag_count, part, part * given_share};
    }
}

/* `trials` at each of the counts 1, 2, 4 … 32,768, given as `chance` says. */
static void fit_to(struct fixture *f, double trials, double (*chance)(double others))
{
    f->count = 0;
    for (size_t i = 0; i < COUNTS; i++) {
        double others = others_of(i);
        double given = trials * chance(others);
        add(f, others, trials - given, 0.0);
        add(f, others + 1.0, given, 1.0);
    }
    propensity_fit_evidence(&f->curve, f->evidence, f->count, DOCUMENTS, &f->fit);
}

static double by_default(double others)
{
    struct propensity_curve curve = propensity_curve_default();
    return propensity_of_curve(&curve, others, DOCUMENTS);
}

static double by_flat_curve(double others)
{
    return propensity_of_curve(&(struct propensity_curve){0.5, 0.4}, others, DOCUMENTS);
}

static double by_steep_curve(double others)
{
    return propensity_of_curve(&(struct propensity_curve){0.6, 2.6}, others, DOCUMENTS);
}

static double falling(double others)
{
    return 0.7 - 0.1 * log10(others);
}

static double mean_error(const struct propensity_fit *fit, double (*chance)(double others))
{
    double sum = 0.0;
    for (size_t i = 0; i < COUNTS; i++) {
        double others = others_of(i);
        sum += fabs(propensity_fit_mean(fit, others, DOCUMENTS) - chance(others)) / COUNTS;
    }
    return sum;
}

/* --- without evidence ---------------------------------------------------------------------------
 */

static void without_evidence_the_mean_is_the_curve(void **state)
{
    struct fixture *f = *state;
    const double counts[] = {0.0, 0.5, 1.0, 2.7, 63.0, 1000.0, 3e5, 1e9};
    const double documents[] = {0.0, 5.0, 1000.0, 76000.0, 1e9};
    for (size_t i = 0; i < 8; i++) {
        for (size_t j = 0; j < 5; j++) {
            assert_near(propensity_fit_mean(&f->none, counts[i], documents[j]),
                        propensity_of_curve(&f->curve, counts[i], documents[j]), 1e-12);
        }
    }
}

static void a_curve_that_breaks_at_no_use_is_clipped_like_the_curve(void **state)
{
    struct fixture *f = *state;
    const double bs[] = {0.0, -0.5};
    for (size_t i = 0; i < 2; i++) {
        struct propensity_curve curve = {0.55, bs[i]};
        propensity_fit_default(&curve, &f->fit);
        assert_near(propensity_fit_mean(&f->fit, 0.0, 1000.0), 0.01, 1e-15);
        assert_near(propensity_fit_mean(&f->fit, 7.0, 1000.0),
                    propensity_of_curve(&curve, 7.0, 1000.0), 1e-12);
    }
}

static void no_trials_are_no_evidence(void **state)
{
    struct fixture *f = *state;
    const struct propensity_evidence idle = {12.0, 0.0, 0.0};
    propensity_fit_evidence(&f->curve, &idle, 1, DOCUMENTS, &f->fit);
    assert_memory_equal(&f->fit, &f->none, sizeof f->none);
    propensity_fit_evidence(&f->curve, NULL, 0, DOCUMENTS, &f->fit);
    assert_memory_equal(&f->fit, &f->none, sizeof f->none);
}

/* A .5, B .4 and A .6, B 2.6: two other kinds of corpora (from memory). */
static void the_published_curves_lie_in_the_interval_of_the_default(void **state)
{
    struct fixture *f = *state;
    for (size_t i = 0; i < COUNTS; i++) {
        double others = others_of(i);
        struct propensity_of_tag tag = propensity_fit_tag(&f->none, others, DOCUMENTS, 0.0, 0.0);
        assert_true(tag.low < by_flat_curve(others) && by_flat_curve(others) < tag.high);
        assert_true(tag.low < by_steep_curve(others) && by_steep_curve(others) < tag.high);
        assert_int_equal(tag.from, PROPENSITY_FROM_CURVE);
    }
}

/* --- fitting ------------------------------------------------------------------------------------
 */

static void evidence_for_the_default_leaves_it(void **state)
{
    struct fixture *f = *state;
    fit_to(f, 500.0, by_default);
    assert_true(mean_error(&f->fit, by_default) < 0.002);
    assert_true(f->fit.deviation_scale == 0.0);
    assert_near(f->fit.trials, 500.0 * COUNTS, 1e-3);
}

static void another_curve_of_the_family_is_found_without_a_deviation(void **state)
{
    struct fixture *f = *state;
    fit_to(f, 500.0, by_flat_curve);
    assert_true(mean_error(&f->fit, by_flat_curve) < 0.3 * mean_error(&f->none, by_flat_curve));
    assert_true(f->fit.deviation_scale == 0.0);
    fit_to(f, 500.0, by_steep_curve);
    assert_true(mean_error(&f->fit, by_steep_curve) < 0.3 * mean_error(&f->none, by_steep_curve));
}

static void what_is_no_such_curve_is_followed_by_the_deviation(void **state)
{
    struct fixture *f = *state;
    fit_to(f, 500.0, falling);
    assert_true(f->fit.deviation_scale > 0.0);
    assert_true(mean_error(&f->fit, falling) < 0.02);
    /* The curve's own parameters do not run away. */
    assert_true(fabs(f->fit.a - 0.55) < 0.2 && f->fit.b > 0.0 && f->fit.b < 5.0);
}

static void a_few_trials_move_little(void **state)
{
    struct fixture *f = *state;
    fit_to(f, 0.25, falling); /* four trials in all */
    double moved = mean_error(&f->fit, by_default);
    assert_true(moved > 0.0 && moved < 0.05);
}

static void more_evidence_is_surer(void **state)
{
    struct fixture *f = *state;
    double spread = propensity_fit_logit_spread(&f->none, 100.0);
    const double trials[] = {10.0, 100.0, 1000.0};
    for (size_t i = 0; i < 3; i++) {
        fit_to(f, trials[i], by_default);
        assert_true(propensity_fit_logit_spread(&f->fit, 100.0) < spread);
        spread = propensity_fit_logit_spread(&f->fit, 100.0);
    }
}

/* Binomial information alone: 1/√(Σ n p(1 - p)) bounds the spread of a curve known up to a shift;
 * the fit frees more than a shift, so it must lie above. */
static void nothing_is_surer_than_its_trials(void **state)
{
    struct fixture *f = *state;
    fit_to(f, 100.0, by_default);
    double information = 0.0;
    for (size_t i = 0; i < COUNTS; i++) {
        double p = by_default(others_of(i));
        information += 100.0 * p * (1.0 - p);
    }
    assert_true(propensity_fit_logit_spread(&f->fit, 30.0) > 0.9 / sqrt(information));
}

static void the_order_of_the_tags_does_not_matter(void **state)
{
    struct fixture *f = *state;
    struct propensity_fit backwards;
    static struct propensity_evidence turned[EVIDENCE];
    fit_to(f, 37.3, falling);
    for (size_t i = 0; i < f->count; i++) {
        turned[i] = f->evidence[f->count - 1 - i];
    }
    propensity_fit_evidence(&f->curve, turned, f->count, DOCUMENTS, &backwards);
    assert_memory_equal(&f->fit, &backwards, sizeof backwards);
}

static void evidence_that_cannot_be_is_left_out(void **state)
{
    struct fixture *f = *state;
    const struct propensity_evidence wrong[] = {{NAN, 5.0, 1.0},
                                                {10.0, INFINITY, 1.0},
                                                {10.0, 5.0, -1.0},
                                                {10.0, 5.0, 6.0},
                                                {10.0, NAN, 1.0}};
    propensity_fit_evidence(&f->curve, wrong, 5, DOCUMENTS, &f->fit);
    assert_memory_equal(&f->fit, &f->none, sizeof f->none);
}

/* The one pair of a tag used once, given, says nothing of p: else the tag would not be known. */
static void a_pair_that_made_its_tag_known_does_not_move_the_curve(void **state)
{
    struct fixture *f = *state;
    const struct propensity_evidence lone = {1.0, 40.0, 40.0};
    propensity_fit_evidence(&f->curve, &lone, 1, DOCUMENTS, &f->fit);
    assert_near(propensity_fit_mean(&f->fit, 1.0, DOCUMENTS),
                propensity_fit_mean(&f->none, 1.0, DOCUMENTS), 1e-9);
}

static void a_fit_extreme_in_every_way_is_still_a_fit(void **state)
{
    struct fixture *f = *state;
    struct propensity_evidence all[4] = {
        {1e12, 1e9, 1e9}, {3.0, 1e9, 0.0}, {0.0, 1e6, 0.0}, {5e9, 1e-9, 1e-9}};
    propensity_fit_evidence(&f->curve, all, 4, 1e12, &f->fit);
    double numbers[PROPENSITY_FIT_DOUBLES];
    memcpy(numbers, &f->fit, sizeof numbers);
    for (size_t i = 0; i < PROPENSITY_FIT_DOUBLES; i++) {
        assert_true(isfinite(numbers[i]));
    }
    for (size_t i = 0; i < COUNTS; i++) {
        double p = propensity_fit_mean(&f->fit, others_of(i), 1e12);
        assert_true(p >= 0.01 && p <= 1.0);
    }
}

/* 60 tags of 100 items, 20 trials each, half of them always given and half never, against all given
 * every other time. */
static void tags_that_differ_lower_the_concentration(void **state)
{
    struct fixture *f = *state;
    struct propensity_evidence tags[60];
    for (size_t i = 0; i < 60; i++) {
        tags[i] = (struct propensity_evidence){100.0, 20.0, 10.0};
    }
    propensity_fit_evidence(&f->curve, tags, 60, DOCUMENTS, &f->fit);
    double alike = f->fit.concentration;
    for (size_t i = 0; i < 60; i++) {
        tags[i].given = i % 2 == 0 ? 20.0 : 0.0;
    }
    propensity_fit_evidence(&f->curve, tags, 60, DOCUMENTS, &f->fit);
    assert_true(alike > f->none.concentration);
    assert_true(f->fit.concentration < 0.2 * f->none.concentration);
}

/* Hidden and given pairs of tags used once as often as α = 0 has it, (1 - p)/p, and as rarely as
 * α = .9 has it. */
static void rarity_follows_what_rare_tags_hide(void **state)
{
    struct fixture *f = *state;
    double odds = 1.0 / by_default(1.0) - 1.0;
    const double rarities[] = {0.0, 0.9};
    double fitted[2];
    for (size_t i = 0; i < 2; i++) {
        double hidden = 200.0 * odds * (1.0 - rarities[i]);
        f->count = 0;
        add(f, 1.0, 200.0, 1.0);
        add(f, 1.0, hidden, 0.0);
        /* Given pairs of tags used twice, read at 1, so that the curve stays there. */
        add(f, 2.0, hidden / odds, 1.0);
        propensity_fit_evidence(&f->curve, f->evidence, f->count, DOCUMENTS, &f->fit);
        fitted[i] = f->fit.rarity;
    }
    assert_near(f->none.rarity, 0.5, 1e-12);
    assert_true(fitted[0] < 0.3 && fitted[1] > 0.7);
}

static void a_fit_survives_as_numbers(void **state)
{
    struct fixture *f = *state;
    fit_to(f, 50.0, falling);
    double numbers[PROPENSITY_FIT_DOUBLES];
    struct propensity_fit restored;
    memcpy(numbers, &f->fit, sizeof numbers);
    memcpy(&restored, numbers, sizeof restored);
    struct propensity_of_tag before = propensity_fit_tag(&f->fit, 40.0, DOCUMENTS, 6.0, 5.0);
    struct propensity_of_tag after = propensity_fit_tag(&restored, 40.0, DOCUMENTS, 6.0, 5.0);
    assert_true(before.p == after.p && before.low == after.low && before.high == after.high);
    assert_true(PROPENSITY_FIT_DOUBLES <= 300);
}

/* --- one tag ------------------------------------------------------------------------------------
 */

/* The posterior by enumeration: Beta(cm, c(1 - m)) times p^k(1 - p)^(n - k) over a grid of p. */
static void a_tag_s_posterior_is_the_enumerated_one(void **state)
{
    struct fixture *f = *state;
    struct propensity_prior prior =
        propensity_fit_prior_at(&f->none, 200.0, propensity_growth(DOCUMENTS), 9.0, 7.0);
    double alpha = prior.concentration * prior.mean;
    double beta = prior.concentration * (1.0 - prior.mean);
    double sum = 0.0;
    double mean = 0.0;
    double below = 0.0;
    struct propensity_of_tag tag = propensity_fit_tag(&f->none, 200.0, DOCUMENTS, 9.0, 7.0);
    for (int i = 0; i < 200000; i++) {
        double p = (i + 0.5) / 200000.0;
        double weight = pow(p, alpha - 1.0 + 7.0) * pow(1.0 - p, beta - 1.0 + 2.0);
        sum += weight;
        mean += weight * p;
        below += p < tag.low || p > tag.high ? weight : 0.0;
    }
    assert_near(tag.p, mean / sum, 1e-9);
    assert_near(below / sum, 0.1, 1e-4);
    assert_near(propensity_fit_tag_mean_at(&f->none, 200.0, propensity_growth(DOCUMENTS), 9.0, 7.0),
                tag.p, 1e-15);
    assert_near(prior.others, 193.0, 0.0);
}

/* Variances add: that of tags around the curve, m(1 - m)/(κ + 1), and the curve's, which is its
 * logit's times (m(1 - m))²; a Beta of concentration c has m(1 - m)/(c + 1). */
static void an_unsure_curve_weighs_less_against_trials(void **state)
{
    struct fixture *f = *state;
    struct propensity_prior prior =
        propensity_fit_prior_at(&f->none, 31.0, propensity_growth(DOCUMENTS), 0.0, 0.0);
    double spread = prior.mean * (1.0 - prior.mean);
    double logit = propensity_fit_logit_spread(&f->none, 31.0);
    double variance = spread / (f->none.concentration + 1.0) + spread * spread * logit * logit;
    assert_near(spread / (prior.concentration + 1.0), variance, 1e-12);
    assert_true(prior.concentration < 0.95 * f->none.concentration);
}

static void a_tag_given_more_often_is_given_more_surely(void **state)
{
    struct fixture *f = *state;
    double last = 0.0;
    for (int given = 0; given <= 10; given++) {
        struct propensity_of_tag tag =
            propensity_fit_tag(&f->none, 5000.0, DOCUMENTS, 10.0, (double)given);
        assert_true(tag.p > last && tag.low < tag.p && tag.p < tag.high);
        last = tag.p;
    }
}

static void more_trials_narrow_the_interval(void **state)
{
    struct fixture *f = *state;
    double width = 1.0;
    const double trials[] = {0.0, 2.0, 6.0, 30.0, 126.0, 510.0};
    for (size_t i = 0; i < 6; i++) {
        struct propensity_of_tag tag =
            propensity_fit_tag(&f->none, 1e5, DOCUMENTS, trials[i], by_default(1e5) * trials[i]);
        assert_true(tag.high - tag.low < width);
        width = tag.high - tag.low;
    }
}

static void what_a_figure_rests_on_is_told(void **state)
{
    struct fixture *f = *state;
    assert_int_equal(propensity_fit_tag(&f->none, 50.0, DOCUMENTS, 2.0, 1.0).from,
                     PROPENSITY_FROM_BOTH);
    assert_int_equal(propensity_fit_tag(&f->none, 5000.0, DOCUMENTS, 500.0, 100.0).from,
                     PROPENSITY_FROM_CHECKS);
    fit_to(f, 10.0, by_default);
    assert_int_equal(propensity_fit_tag(&f->fit, 50.0, DOCUMENTS, 0.0, 0.0).from,
                     PROPENSITY_FROM_BOTH);
}

static void a_lone_given_pair_is_no_trial_of_its_tag(void **state)
{
    struct fixture *f = *state;
    assert_near(propensity_fit_tag(&f->none, 1.0, DOCUMENTS, 1.0, 1.0).p,
                propensity_fit_mean(&f->none, 1.0, DOCUMENTS), 1e-15);
    assert_true(propensity_fit_tag(&f->none, 1.0, DOCUMENTS, 1.0, 0.0).p <
                propensity_fit_mean(&f->none, 1.0, DOCUMENTS));
}

/* --- late tags ----------------------------------------------------------------------------------
 */

/* 12 of 4,000 items since are 120 of 40,000; 12 of 100 count as 12 of 1,000: 480 of 40,000. */
static void a_late_tag_counts_as_if_it_had_been_there(void **state)
{
    (void)state;
    assert_near(propensity_late_count(12.0, 40000.0, 4000.0), 120.0, 1e-12);
    assert_near(propensity_late_count(12.0, 40000.0, 100.0), 480.0, 1e-12);
    assert_near(propensity_late_count(12.0, 40000.0, 40000.0), 12.0, 1e-12);
}

static void in_a_small_store_no_tag_is_late(void **state)
{
    (void)state;
    assert_near(propensity_late_count(3.0, 500.0, 20.0), 3.0, 1e-12);
    assert_near(propensity_late_count(3.0, 0.0, 0.0), 3.0, 1e-12);
}

/* Knots at 0, 1, 3, 7, 15: 5 lies halfway from 3 to 7, 10 three eighths of the way from 7 to 15. */
static void a_count_lies_between_two_knots(void **state)
{
    (void)state;
    struct propensity_place place = propensity_knots_at(5.0);
    assert_true(place.below == 2 && place.share == 0.5);
    place = propensity_knots_at(10.0);
    assert_true(place.below == 3 && place.share == 0.375);
    place = propensity_knots_at(0.0);
    assert_true(place.below == 0 && place.share == 0.0);
    place = propensity_knots_at(1e300);
    assert_true(place.below == PROPENSITY_KNOTS - 2 && place.share == 1.0);
}

static void a_sum_over_one_knot_varies_as_its_logit(void **state)
{
    struct fixture *f = *state;
    double gradient[PROPENSITY_KNOTS] = {0};
    gradient[5] = -3.0;
    double spread = propensity_fit_logit_spread(&f->none, 31.0);
    assert_near(propensity_fit_variance(&f->none, gradient), 9.0 * spread * spread, 1e-12);
}

/* 5 lies halfway from the knot at 3 to that at 7. */
static void between_knots_the_spread_is_that_of_both(void **state)
{
    struct fixture *f = *state;
    double gradient[PROPENSITY_KNOTS] = {0};
    gradient[2] = 0.5;
    gradient[3] = 0.5;
    double spread = propensity_fit_logit_spread(&f->none, 5.0);
    assert_near(propensity_fit_variance(&f->none, gradient), spread * spread, 1e-12);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup(without_evidence_the_mean_is_the_curve, set_up),
        cmocka_unit_test_setup(a_curve_that_breaks_at_no_use_is_clipped_like_the_curve, set_up),
        cmocka_unit_test_setup(no_trials_are_no_evidence, set_up),
        cmocka_unit_test_setup(the_published_curves_lie_in_the_interval_of_the_default, set_up),
        cmocka_unit_test_setup(evidence_for_the_default_leaves_it, set_up),
        cmocka_unit_test_setup(another_curve_of_the_family_is_found_without_a_deviation, set_up),
        cmocka_unit_test_setup(what_is_no_such_curve_is_followed_by_the_deviation, set_up),
        cmocka_unit_test_setup(a_few_trials_move_little, set_up),
        cmocka_unit_test_setup(more_evidence_is_surer, set_up),
        cmocka_unit_test_setup(nothing_is_surer_than_its_trials, set_up),
        cmocka_unit_test_setup(the_order_of_the_tags_does_not_matter, set_up),
        cmocka_unit_test_setup(evidence_that_cannot_be_is_left_out, set_up),
        cmocka_unit_test_setup(a_pair_that_made_its_tag_known_does_not_move_the_curve, set_up),
        cmocka_unit_test_setup(a_fit_extreme_in_every_way_is_still_a_fit, set_up),
        cmocka_unit_test_setup(tags_that_differ_lower_the_concentration, set_up),
        cmocka_unit_test_setup(rarity_follows_what_rare_tags_hide, set_up),
        cmocka_unit_test_setup(a_fit_survives_as_numbers, set_up),
        cmocka_unit_test_setup(a_tag_s_posterior_is_the_enumerated_one, set_up),
        cmocka_unit_test_setup(an_unsure_curve_weighs_less_against_trials, set_up),
        cmocka_unit_test_setup(a_tag_given_more_often_is_given_more_surely, set_up),
        cmocka_unit_test_setup(more_trials_narrow_the_interval, set_up),
        cmocka_unit_test_setup(what_a_figure_rests_on_is_told, set_up),
        cmocka_unit_test_setup(a_lone_given_pair_is_no_trial_of_its_tag, set_up),
        cmocka_unit_test_setup(a_late_tag_counts_as_if_it_had_been_there, set_up),
        cmocka_unit_test_setup(in_a_small_store_no_tag_is_late, set_up),
        cmocka_unit_test_setup(a_count_lies_between_two_knots, set_up),
        cmocka_unit_test_setup(a_sum_over_one_knot_varies_as_its_logit, set_up),
        cmocka_unit_test_setup(between_knots_the_spread_is_that_of_both, set_up),
    };
    return cmocka_run_group_tests_name("propensity_fit", tests, NULL, NULL);
}
