/*
 * Evidence into bins, and what is fitted beside the curve. All sums are of whole multiples of
 * 2^-20, so the order of the tags does not matter.
 *
 * Tags differ around the curve, so a tag with n trials counts as n(κ + 1)/(κ + n) of them (the
 * variance of a beta-binomial), with κ from the squared residuals: a few rounds of both.
 */
#include <math.h>
#include <stdbool.h>
#include <stdint.h>
#include <string.h>

#include "daemon/learner/propensity_private.h"

enum {
    ROUNDS = 3,
    RARE_COUNTS = 64, /* one bin each */
    RARITY_STEPS = 100
};

static const double DEFAULT_CONCENTRATION = 60.0;
/* The prior of κ weighs as much as this many tags. */
static const double CONCENTRATION_TAGS = 4.0;
static const double LEAST_RHO = 0.0005;
static const double MOST_RHO = 0.5;
/* Vocabularies with few common and many rare terms (common practice) lie around one half. */
static const double DEFAULT_RARITY = 0.5;
static const double RARITY_SPREAD = 0.25;
static const double FIXED_ONE = 1048576.0; /* 2^20 */

static int64_t fixed(double amount)
{
    return llrint(fmin(amount, 1e7) * FIXED_ONE);
}

static size_t bin_of(double tag_count)
{
    return tag_count >= (double)UINT32_MAX ? CENSUS_BINS - 1
                                           : census_bin((uint32_t)fmax(tag_count, 0.0));
}

static bool usable(const struct propensity_evidence *tag)
{
    return isfinite(tag->tag_count) && isfinite(tag->trials) && tag->trials > 0.0 &&
           tag->given >= 0.0 && tag->given <= tag->trials;
}

/* Sums in whole multiples of 2^-20. */
struct sums {
    int64_t given[CENSUS_BINS];
    int64_t hidden[CENSUS_BINS];
    int64_t apart[CENSUS_BINS]; /* trials times how far their count is from the bin's middle */
    int64_t trials;
};

static void sum_pairs(struct sums *sums, int64_t *sum, double tag_count, double amount)
{
    size_t bin = bin_of(tag_count);
    double apart = tag_count / fmax(census_middle(bin), 1.0) - 1.0;
    sum[bin] += fixed(amount);
    sums->apart[bin] += fixed(amount * fmin(fmax(apart, -0.9), 1.0));
}

/* A given pair is put `less` below its tag's count. Returns the trials. */
static double fill_bins(const struct propensity_evidence *tags, size_t count, double concentration,
                        double less, struct propensity_bins *ret_bins)
{
    struct sums sums = {0};
    for (size_t i = 0; i < count; i++) {
        const struct propensity_evidence *tag = &tags[i];
        if (!usable(tag)) {
            continue;
        }
        sums.trials += fixed(tag->trials);
        double weight = (concentration + 1.0) / (concentration + fmax(tag->trials, 1.0));
        sum_pairs(&sums, sums.given, tag->tag_count - less, weight * tag->given);
        sum_pairs(&sums, sums.hidden, tag->tag_count, weight * (tag->trials - tag->given));
    }
    for (size_t bin = 0; bin < CENSUS_BINS; bin++) {
        ret_bins->given[bin] = (double)sums.given[bin] / FIXED_ONE;
        ret_bins->hidden[bin] = (double)sums.hidden[bin] / FIXED_ONE;
        double trials = (double)(sums.given[bin] + sums.hidden[bin]);
        double apart = trials > 0.0 ? (double)sums.apart[bin] / trials : 0.0;
        ret_bins->count[bin] = census_middle(bin) * (1.0 + apart);
    }
    return (double)sums.trials / FIXED_ONE;
}

/*
 * ρ = 1/(κ + 1) from E (k - nm)² = nm(1 - m)(1 + (n - 1)ρ): per tag z = (k - nm)²/(nm(1 - m)) - 1
 * has the mean (n - 1)ρ, weighted by (n - 1)/(1 + (n - 1)ρ)², about the inverse of its variance. In
 * units of the prior's ρ² a tag with 1/ρ trials or more weighs about 1.
 */
static double concentration_of(const struct propensity_fit *fit,
                               const struct propensity_evidence *tags, size_t count, double growth)
{
    const double rho_prior = 1.0 / (DEFAULT_CONCENTRATION + 1.0);
    double rho0 = 1.0 / (fit->concentration + 1.0);
    int64_t upper = 0;
    int64_t lower = 0;
    for (size_t i = 0; i < count; i++) {
        const struct propensity_evidence *tag = &tags[i];
        double others = tag->tag_count - tag->given;
        if (!usable(tag) || tag->trials <= 1.0 || others < 1.0) {
            continue;
        }
        double m = propensity_fit_mean_at(fit, others, growth);
        double residual = tag->given - tag->trials * m;
        double z = residual * residual / fmax(tag->trials * m * (1.0 - m), 1e-3) - 1.0;
        double more = tag->trials - 1.0;
        double damped = 1.0 + more * rho0;
        double scaled = more * rho_prior * rho_prior / (damped * damped);
        upper += fixed(scaled * fmin(z, 1e3));
        lower += fixed(scaled * more);
    }
    double rho = ((double)upper / FIXED_ONE + CONCENTRATION_TAGS * rho_prior) /
                 ((double)lower / FIXED_ONE + CONCENTRATION_TAGS);
    return 1.0 / fmin(fmax(rho, LEAST_RHO), MOST_RHO) - 1.0;
}

/*
 * Of tags used n times, the odds of a true pair to be hidden are (1 - α/n)(1 - p)/p, with the
 * given pairs at n too: their logarithmic likelihood and prior.
 */
static double rarity_fit(const struct propensity_bins *bins, const double *odds, double rarity)
{
    double departure = (rarity - DEFAULT_RARITY) / RARITY_SPREAD;
    double sum = -0.5 * departure * departure;
    for (size_t n = 1; n < RARE_COUNTS; n++) {
        double hidden_odds = (1.0 - rarity / (double)n) * odds[n];
        sum += bins->hidden[n] * log(fmax(hidden_odds, 1e-12));
        sum -= (bins->given[n] + bins->hidden[n]) * log1p(hidden_odds);
    }
    return sum;
}

/* The mean and the spread of α over a grid. */
static void fit_rarity(const struct propensity_evidence *tags, size_t count, double growth,
                       struct propensity_fit *fit)
{
    struct propensity_bins bins;
    double odds[RARE_COUNTS] = {0};
    double heights[RARITY_STEPS];
    double top = -INFINITY;
    (void)fill_bins(tags, count, fit->concentration, 0.0, &bins);
    for (size_t n = 1; n < RARE_COUNTS; n++) {
        double p = propensity_fit_mean_at(fit, (double)n, growth);
        odds[n] = (1.0 - p) / p;
    }
    for (size_t i = 0; i < RARITY_STEPS; i++) {
        heights[i] = rarity_fit(&bins, odds, (double)i / RARITY_STEPS);
        top = fmax(top, heights[i]);
    }
    double sums[3] = {0};
    for (size_t i = 0; i < RARITY_STEPS; i++) {
        double rarity = (double)i / RARITY_STEPS;
        double weight = exp(heights[i] - top);
        sums[0] += weight;
        sums[1] += weight * rarity;
        sums[2] += weight * rarity * rarity;
    }
    fit->rarity = sums[1] / sums[0];
    fit->rarity_spread = sqrt(fmax(sums[2] / sums[0] - fit->rarity * fit->rarity, 0.0));
}

void propensity_fit_default(const struct propensity_curve *curve, struct propensity_fit *ret_fit)
{
    struct propensity_bins none = {0};
    memset(ret_fit, 0, sizeof *ret_fit);
    propensity_solve(curve, 1.0, &none, ret_fit);
    ret_fit->a = curve->a;
    ret_fit->b = curve->b;
    memset(ret_fit->deviation, 0, sizeof ret_fit->deviation);
    ret_fit->deviation_scale = 0.0;
    ret_fit->concentration = DEFAULT_CONCENTRATION;
    ret_fit->rarity = DEFAULT_RARITY;
    ret_fit->rarity_spread = RARITY_SPREAD;
}

void propensity_fit_evidence(const struct propensity_curve *defaults,
                             const struct propensity_evidence *tags, size_t count, double documents,
                             struct propensity_fit *ret_fit)
{
    struct propensity_bins bins;
    double growth = propensity_growth(documents);
    propensity_fit_default(defaults, ret_fit);
    for (int round = 0; round < ROUNDS; round++) {
        double trials = fill_bins(tags, count, ret_fit->concentration, 1.0, &bins);
        if (!(trials > 0.0)) {
            return;
        }
        ret_fit->trials = trials;
        ret_fit->documents = documents;
        propensity_solve(defaults, growth, &bins, ret_fit);
        ret_fit->concentration = concentration_of(ret_fit, tags, count, growth);
    }
    fit_rarity(tags, count, growth, ret_fit);
}
