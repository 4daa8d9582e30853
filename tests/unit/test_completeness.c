/*
 * Completeness by enumeration: over a grid of p for the posterior, and over the negative binomial's
 * chances for the hidden pairs. With ln N = 1 + growth and N_l = 1 the curve gives
 * p = 1/(1 + growth) exactly, whatever A and B.
 */
#include "daemon/learner/completeness.h"

#include <string.h>

#include "daemon/learner/beta.h"
#include "tests/unit/near.h"

struct fixture {
    struct propensity_fit fit;   /* the default */
    struct propensity_fit known; /* p known exactly, no rarity */
};

static int set_up(void **state)
{
    static struct fixture fixture;
    struct propensity_curve curve = propensity_curve_default();
    propensity_fit_default(&curve, &fixture.fit);
    fixture.known = fixture.fit;
    memset(fixture.known.covariance, 0, sizeof fixture.known.covariance);
    fixture.known.concentration = 1e9;
    fixture.known.rarity = 0.0;
    fixture.known.rarity_spread = 0.0;
    *state = &fixture;
    return 0;
}

/* N for which a tag with N_l = 1 has this p, at most .5. */
static double documents_for(double p)
{
    return exp(1.0 + (1.0 - p) / p);
}

/* As many on record as given, nothing checked. */
static struct completeness_tag simple_tag(double given)
{
    return (struct completeness_tag){.count = given, .unprompted_open = given, .tag_count = 1.0};
}

/* --- one tag ------------------------------------------------------------------------------------
 */

/* 30 given at p = .4: 75 belong, 45 are missing; 10 of these were found since, and are on record:
 * 35 are missing beside 40. */
static void missing_pairs_by_hand(void **state)
{
    struct fixture *f = *state;
    struct completeness_tag tag = simple_tag(30.0);
    tag.found = 10.0;
    tag.count = 40.0;
    struct completeness result = completeness_of_tag(&f->known, &tag, documents_for(0.4));
    assert_near(result.missing, 35.0, 1e-6);
    assert_near(result.given, 40.0, 0.0);
    assert_near(result.share, 40.0 / 75.0, 1e-8);
    assert_near(completeness_missing_at(&f->known, &tag, propensity_growth(documents_for(0.4))),
                result.missing, 1e-12);
}

/* α = .5: (1 - .5)·.6/.4 = .75 for a tag used once, where 1/p - 1 = 1.5. */
static void a_tag_used_once_hides_less(void **state)
{
    struct fixture *f = *state;
    struct completeness_tag tag = simple_tag(1.0);
    f->known.rarity = 0.5;
    assert_near(completeness_of_tag(&f->known, &tag, documents_for(0.4)).missing, 0.75, 1e-8);
}

static void more_found_than_expected_leaves_nothing_missing(void **state)
{
    struct fixture *f = *state;
    struct completeness_tag tag = simple_tag(10.0);
    tag.found = 12.0;
    tag.count = 22.0;
    struct completeness result = completeness_of_tag(&f->known, &tag, documents_for(0.5));
    assert_near(result.missing, 0.0, 0.0);
    assert_near(result.share, 1.0, 0.0);
    assert_true(result.low < 0.95 && result.high == 1.0);
}

/* Ten given at p = .5, eight hidden ones found: what is left has the chances of the hidden pairs
 * given that there are at least eight. P(H <= h) = I_p(10, h + 1). */
static void what_was_found_is_taken_as_known_in_the_interval(void **state)
{
    struct fixture *f = *state;
    struct completeness_tag tag = simple_tag(10.0);
    tag.found = 8.0;
    tag.count = 18.0;
    struct completeness result = completeness_of_tag(&f->known, &tag, documents_for(0.5));
    double below = beta_cdf(0.5, 10.0, 8.0);
    double least = 8.0;
    while (beta_cdf(0.5, 10.0, least + 1.0) - below < 0.05 * (1.0 - below)) {
        least += 1.0;
    }
    double most = least;
    while (beta_cdf(0.5, 10.0, most + 1.0) - below < 0.95 * (1.0 - below)) {
        most += 1.0;
    }
    assert_near(result.high, 18.0 / (18.0 + least - 8.0), 1e-9);
    assert_near(result.low, 18.0 / (18.0 + most - 8.0), 1e-9);
}

/* The mean of r(1 - p)/p over given pairs, whose p is Beta(α + 1, β), on a grid. */
static void missing_is_its_mean_over_the_posterior(void **state)
{
    struct fixture *f = *state;
    double growth = propensity_growth(76000.0);
    struct completeness_tag tag = {
        .count = 90.0, .unprompted_open = 80.0, .tag_count = 88.0, .trials = 10.0, .given = 8.0};
    struct propensity_prior prior = propensity_fit_prior_at(&f->fit, 88.0, growth, 10.0, 8.0);
    double alpha = prior.concentration * prior.mean + 8.0;
    double beta = prior.concentration * (1.0 - prior.mean) + 2.0;
    double sum = 0.0;
    double hidden = 0.0;
    for (int i = 0; i < 200000; i++) {
        double p = (i + 0.5) / 200000.0;
        double weight = pow(p, alpha) * pow(1.0 - p, beta - 1.0);
        sum += weight;
        hidden += weight * (80.0 - f->fit.rarity) * (1.0 - p) / p;
    }
    struct completeness result = completeness_of_tag(&f->fit, &tag, 76000.0);
    assert_near(result.missing, hidden / sum, 1e-6 * result.missing);
    assert_int_equal(result.from, PROPENSITY_FROM_BOTH);
}

/* scipy.stats: nbinom.ppf((.05, .95), 10, .5) is 4 and 18, with 3, .2 2 and 27, with 200, .3 403
 * and 533. */
static void with_a_known_propensity_the_hidden_are_negative_binomial(void **state)
{
    struct fixture *f = *state;
    const double rows[][4] = {
        {10.0, 0.5, 4.0, 18.0}, {3.0, 0.2, 2.0, 27.0}, {200.0, 0.3, 403.0, 533.0}};
    for (size_t i = 0; i < 3; i++) {
        struct completeness_tag tag = simple_tag(rows[i][0]);
        struct completeness result =
            completeness_of_tag(&f->known, &tag, documents_for(rows[i][1]));
        assert_near(result.high, rows[i][0] / (rows[i][0] + rows[i][2]), 1e-9);
        assert_near(result.low, rows[i][0] / (rows[i][0] + rows[i][3]), 1e-9);
    }
}

/* The chance of at most `most` hidden: the negative binomial's, r successes, over a grid of the p
 * of given pairs. It is I_p(r, most + 1). */
static double chance_of_at_most(double most, double r, double alpha, double beta)
{
    double sum = 0.0;
    double below = 0.0;
    for (int i = 0; i < 4000; i++) {
        double p = (i + 0.5) / 4000.0;
        double weight = pow(p, alpha) * pow(1.0 - p, beta - 1.0);
        sum += weight;
        below += weight * beta_cdf(p, r, most + 1.0);
    }
    return below / sum;
}

static void the_interval_holds_the_realised_share_nine_times_in_ten(void **state)
{
    struct fixture *f = *state;
    const double givens[] = {2.0, 10.0, 150.0};
    for (size_t i = 0; i < 3; i++) {
        double given = givens[i];
        struct completeness_tag tag = simple_tag(given);
        tag.tag_count = given;
        struct propensity_prior prior =
            propensity_fit_prior_at(&f->fit, given, propensity_growth(2000.0), 0.0, 0.0);
        double alpha = prior.concentration * prior.mean;
        double beta = prior.concentration * (1.0 - prior.mean);
        struct completeness result = completeness_of_tag(&f->fit, &tag, 2000.0);
        double least = round(given / result.high - given);
        double most = round(given / result.low - given);
        double r = given - f->fit.rarity;
        assert_true(chance_of_at_most(most, r, alpha, beta) >= 0.95);
        assert_true(chance_of_at_most(most - 1.0, r, alpha, beta) < 0.95);
        assert_true(chance_of_at_most(least, r, alpha, beta) >= 0.05);
        assert_true(least == 0.0 || chance_of_at_most(least - 1.0, r, alpha, beta) < 0.05);
    }
}

/* Just below and just above 20,000 hidden the interval is made in two ways. */
static void many_hidden_pairs_have_nearly_the_same_interval(void **state)
{
    struct fixture *f = *state;
    struct completeness_tag few = simple_tag(19950.0);
    struct completeness_tag many = simple_tag(20050.0);
    f->known.concentration = 100.0;
    double documents = documents_for(0.5);
    struct completeness summed = completeness_of_tag(&f->known, &few, documents);
    struct completeness approximated = completeness_of_tag(&f->known, &many, documents);
    assert_near(approximated.low, summed.low, 0.01);
    assert_near(approximated.high, summed.high, 0.01);
    assert_true(summed.high - summed.low > 0.1);
}

static void the_more_was_tried_the_surer_is_the_share(void **state)
{
    struct fixture *f = *state;
    struct completeness_tag tag = simple_tag(4000.0);
    tag.tag_count = 4000.0;
    double width = 1.0;
    const double trials[] = {0.0, 4.0, 12.0, 28.0, 60.0};
    for (size_t i = 0; i < 5; i++) {
        tag.trials = trials[i];
        tag.given = 0.85 * trials[i];
        struct completeness result = completeness_of_tag(&f->fit, &tag, 76000.0);
        assert_true(result.low < result.share && result.share < result.high);
        assert_true(result.high - result.low < width);
        width = result.high - result.low;
    }
}

static void a_tag_nobody_gave_may_be_missing_somewhere(void **state)
{
    struct fixture *f = *state;
    const struct completeness_tag ruled = {.count = 3.0, .found = 3.0};
    struct completeness result = completeness_of_tag(&f->fit, &ruled, 76000.0);
    assert_near(result.share, 1.0, 0.0);
    assert_true(result.low < 1.0 && result.high == 1.0);
    const struct completeness_tag unused = {.count = 0.0};
    result = completeness_of_tag(&f->fit, &unused, 76000.0);
    assert_true(result.low == 0.0 && result.high == 1.0);
    assert_int_equal(result.from, PROPENSITY_FROM_CURVE);
}

/* --- many tags ----------------------------------------------------------------------------------
 */

static struct completeness of_alike(const struct propensity_fit *fit, size_t count,
                                    const struct completeness_tag *tag, double documents)
{
    struct completeness_sum sum;
    completeness_sum_init(&sum);
    for (size_t i = 0; i < count; i++) {
        completeness_sum_add(&sum, fit, tag, propensity_growth(documents));
    }
    return completeness_of_sum(&sum, fit);
}

static void a_sum_is_that_of_its_tags(void **state)
{
    struct fixture *f = *state;
    struct completeness_tag tag = simple_tag(50.0);
    tag.trials = 4.0;
    tag.given = 3.0;
    tag.tag_count = 53.0;
    double one = completeness_of_tag(&f->fit, &tag, 76000.0).missing;
    struct completeness result = of_alike(&f->fit, 7, &tag, 76000.0);
    assert_near(result.missing, 7.0 * one, 1e-9);
    assert_near(result.given, 350.0, 1e-9);
    assert_near(result.share, 350.0 / (350.0 + 7.0 * one), 1e-12);
    assert_true(result.low < result.share && result.share < result.high);
}

/* M = U e^-logit: the logarithm of the sum varies as the logit does, however many tags share it. A
 * count at a knot (7) and so many pairs that their own spread is nothing. */
static void what_the_curve_does_not_know_is_shared(void **state)
{
    struct fixture *f = *state;
    struct completeness_tag tag = simple_tag(1e9);
    tag.tag_count = 7.0;
    f->fit.concentration = 1e9;
    double spread = propensity_fit_logit_spread(&f->fit, 7.0);
    double ratio = exp(INTERVAL_Z * sqrt(log1p(spread * spread)));
    for (size_t count = 1; count <= 100; count *= 10) {
        struct completeness result = of_alike(&f->fit, count, &tag, 76000.0);
        assert_near(result.given / result.low - result.given, result.missing * ratio,
                    1e-4 * result.missing);
    }
}

/* Independent parts: a hundred tags are ten times surer. p = .5, κ = 1e9: the variance of the
 * hidden pairs is U(1 - p)/p² = 2U: 800 for 400, 80,000 for a hundred such: 283 of 40,000. */
static void what_is_each_tag_s_own_evens_out(void **state)
{
    struct fixture *f = *state;
    struct completeness_tag tag = simple_tag(400.0);
    struct completeness result = of_alike(&f->known, 100, &tag, documents_for(0.5));
    double sd = sqrt(80000.0) / 40000.0;
    double most = 40000.0 * exp(INTERVAL_Z * sqrt(log1p(sd * sd)));
    assert_near(result.low, 40000.0 / (40000.0 + most), 1e-6);
}

/* p = .5, κ = 102: the p of given pairs is Beta(52, 51), whose 1/p varies by (1 - p)/(p²(α - 1)),
 * 2/50 (the variance of a Beta prime: 51·102/(50·51²) = .04). U = 1,000 in a tag: 2,000 + 40,000.
 */
static void tags_that_differ_are_less_sure_together(void **state)
{
    struct fixture *f = *state;
    f->known.concentration = 102.0;
    struct completeness_tag tag = simple_tag(1000.0);
    struct completeness result = of_alike(&f->known, 10, &tag, documents_for(0.5));
    double sd = sqrt(10.0 * 42000.0) / 10000.0;
    double most = 10000.0 * exp(INTERVAL_Z * sqrt(log1p(sd * sd)));
    assert_near(result.low, 10000.0 / (10000.0 + most), 1e-9);
}

static void sums_in_parts_are_the_sum(void **state)
{
    struct fixture *f = *state;
    struct completeness_tag tag = simple_tag(20.0);
    tag.tag_count = 20.0;
    struct completeness_sum parts[2];
    double growth = propensity_growth(76000.0);
    for (size_t i = 0; i < 2; i++) {
        completeness_sum_init(&parts[i]);
        completeness_sum_add(&parts[i], &f->fit, &tag, growth);
        completeness_sum_add(&parts[i], &f->fit, &tag, growth);
    }
    completeness_sum_merge(&parts[0], &parts[1]);
    struct completeness merged = completeness_of_sum(&parts[0], &f->fit);
    struct completeness whole = of_alike(&f->fit, 4, &tag, 76000.0);
    assert_near(merged.missing, whole.missing, 1e-9);
    assert_near(merged.low, whole.low, 1e-12);
    assert_near(merged.high, whole.high, 1e-12);
}

/* A hundred tags used once, p = .1: each step of α moves the sum by 100·9. */
static void what_rarity_does_not_know_is_shared(void **state)
{
    struct fixture *f = *state;
    struct completeness_tag tag = simple_tag(1.0);
    struct completeness before = of_alike(&f->known, 100, &tag, documents_for(0.1));
    f->known.rarity_spread = 0.5;
    struct completeness after = of_alike(&f->known, 100, &tag, documents_for(0.1));
    assert_near(after.share, before.share, 0.0);
    assert_true(after.low < before.low && before.high < after.high);
    /* ±1.645 of √(450² + 9,000) in 900 as a logarithm. */
    double sd = sqrt(450.0 * 450.0 + 100.0 * 9.0 * 10.0) / 900.0;
    double most = 900.0 * exp(INTERVAL_Z * sqrt(log1p(sd * sd)));
    assert_near(after.low, 100.0 / (100.0 + most), 1e-6);
}

static void nothing_at_all_is_complete(void **state)
{
    struct fixture *f = *state;
    struct completeness_sum sum;
    completeness_sum_init(&sum);
    struct completeness result = completeness_of_sum(&sum, &f->fit);
    assert_near(result.share, 1.0, 0.0);
    assert_near(result.missing, 0.0, 0.0);
    assert_int_equal(result.from, PROPENSITY_FROM_CURVE);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup(missing_pairs_by_hand, set_up),
        cmocka_unit_test_setup(a_tag_used_once_hides_less, set_up),
        cmocka_unit_test_setup(more_found_than_expected_leaves_nothing_missing, set_up),
        cmocka_unit_test_setup(what_was_found_is_taken_as_known_in_the_interval, set_up),
        cmocka_unit_test_setup(missing_is_its_mean_over_the_posterior, set_up),
        cmocka_unit_test_setup(with_a_known_propensity_the_hidden_are_negative_binomial, set_up),
        cmocka_unit_test_setup(the_interval_holds_the_realised_share_nine_times_in_ten, set_up),
        cmocka_unit_test_setup(many_hidden_pairs_have_nearly_the_same_interval, set_up),
        cmocka_unit_test_setup(the_more_was_tried_the_surer_is_the_share, set_up),
        cmocka_unit_test_setup(a_tag_nobody_gave_may_be_missing_somewhere, set_up),
        cmocka_unit_test_setup(a_sum_is_that_of_its_tags, set_up),
        cmocka_unit_test_setup(what_the_curve_does_not_know_is_shared, set_up),
        cmocka_unit_test_setup(what_is_each_tag_s_own_evens_out, set_up),
        cmocka_unit_test_setup(tags_that_differ_are_less_sure_together, set_up),
        cmocka_unit_test_setup(sums_in_parts_are_the_sum, set_up),
        cmocka_unit_test_setup(what_rarity_does_not_know_is_shared, set_up),
        cmocka_unit_test_setup(nothing_at_all_is_complete, set_up),
    };
    return cmocka_run_group_tests_name("completeness", tests, NULL, NULL);
}
