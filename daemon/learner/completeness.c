/*
 * Why the mean is exactly r(1 - p)/p, r = U less the rarity: the curve's Beta(α, β) is of the p of
 * true pairs. A given pair is met in proportion to p, so the p of given pairs is Beta(α + 1, β),
 * and the mean of 1/p - 1 under it is β/α = 1/p - 1 at p = α/(α + β). With p from it, r successes
 * leave hidden pairs that are beta-negative-binomial: P(h + 1)/P(h) = (r + h)(β + h)/((h + 1)(α + 1
 * + r + β + h)).
 */
#include "daemon/learner/completeness.h"

#include <math.h>
#include <stdbool.h>
#include <string.h>

#include "daemon/learner/beta.h"

static const double LEAST_PROPENSITY = 0.01;
/* A tag with nothing given may have something hidden all the same. */
static const double LEAST_SUCCESSES = 0.5;
/* Beyond these the chances are not summed one by one. */
static const double MOST_SUMMED = 20000.0;
static const double LEAST_LOG_CHANCE = -700.0;

/* The hidden pairs' distribution. */
struct hidden {
    double successes; /* r */
    double alpha;     /* of given pairs: α + 1 */
    double beta;
};

static double p_of(const struct propensity_prior *prior)
{
    double p = (prior->concentration * prior->mean + prior->given) /
               (prior->concentration + prior->trials);
    return fmin(fmax(p, LEAST_PROPENSITY), 1.0);
}

static double successes_of(const struct propensity_fit *fit, const struct completeness_tag *tag)
{
    return fmax(tag->unprompted_open - fit->rarity, 0.0);
}

static double missing_of(double successes, double p, double found)
{
    return fmax(successes * (1.0 - p) / p - found, 0.0);
}

static double share_of(double count, double missing)
{
    return count + missing > 0.0 ? count / (count + missing) : 1.0;
}

static double log_chance_of_none(const struct hidden *hidden)
{
    double a = hidden->alpha;
    double r = hidden->successes;
    double b = hidden->beta;
    return beta_log_gamma(a + r) - beta_log_gamma(a) + beta_log_gamma(a + b) -
           beta_log_gamma(a + b + r);
}

/* The 5 % and 95 % points of the hidden pairs, given that there are at least `found`. */
static struct interval summed(const struct hidden *hidden, double found, double log_chance)
{
    struct interval points = {.low = -1.0, .high = -1.0};
    double chance = exp(log_chance);
    double below = 0.0; /* P(H < found), then part of the targets */
    double sum = 0.0;   /* P(H <= h) */
    double h = 0.0;
    double total = hidden->alpha + hidden->successes + hidden->beta;
    while (h < 50.0 * MOST_SUMMED) {
        if (h < found) {
            below = sum + chance;
        }
        sum += chance;
        if (h >= found) {
            double share = (sum - below) / fmax(1.0 - below, 1e-12);
            if (points.low < 0.0 && share >= 0.05) {
                points.low = h;
            }
            if (share >= 0.95 || 1.0 - below <= 1e-12) {
                break;
            }
        }
        chance *= (hidden->successes + h) * (hidden->beta + h) / ((h + 1.0) * (total + h));
        h += 1.0;
    }
    points.high = h;
    points.low = points.low < 0.0 ? fmin(found, h) : points.low;
    return points;
}

/* Many: the spread of p and of the count given p, added as variances of the logarithm. */
static struct interval approximated(const struct hidden *hidden)
{
    double p = hidden->alpha / (hidden->alpha + hidden->beta);
    double low = fmax(beta_quantile(0.05, hidden->alpha, hidden->beta), 1e-6);
    double high = beta_quantile(0.95, hidden->alpha, hidden->beta);
    double middle = log(hidden->successes * (1.0 - p) / p);
    double most = log(hidden->successes * (1.0 - low) / low) - middle;
    double least = middle - log(hidden->successes * fmax(1.0 - high, 1e-9) / high);
    /* sd/mean of the negative binomial: √(U(1 - p))/p over U(1 - p)/p. */
    double own = INTERVAL_Z / sqrt(hidden->successes * (1.0 - p));
    return (struct interval){
        .low = exp(middle - sqrt(least * least + own * own)),
        .high = exp(middle + sqrt(most * most + own * own)),
    };
}

static struct interval hidden_interval(const struct hidden *hidden, double found)
{
    double mean = hidden->successes * hidden->beta / fmax(hidden->alpha - 1.0, 1e-3);
    double log_chance = log_chance_of_none(hidden);
    if (mean < MOST_SUMMED && log_chance > LEAST_LOG_CHANCE) {
        return summed(hidden, ceil(found), log_chance);
    }
    return approximated(hidden);
}

struct completeness completeness_of_tag(const struct propensity_fit *fit,
                                        const struct completeness_tag *tag, double documents)
{
    struct propensity_prior prior = propensity_fit_prior_at(
        fit, tag->tag_count, propensity_growth(documents), tag->trials, tag->given);
    double p = p_of(&prior);
    double successes = successes_of(fit, tag);
    double missing = missing_of(successes, p, tag->found);
    double share = share_of(tag->count, missing);
    double weight = prior.concentration + prior.trials;
    struct completeness result = {
        .share = share,
        .low = share,
        .high = share,
        .given = tag->count,
        .missing = missing,
        .from = propensity_from_what(fit, &prior),
    };
    if (!(tag->count > 0.0)) {
        result.low = 0.0;
        result.high = 1.0;
        return result;
    }
    if (p < 1.0) {
        struct hidden hidden = {.successes = fmax(successes, LEAST_SUCCESSES),
                                .alpha = weight * p + 1.0,
                                .beta = weight * (1.0 - p)};
        struct interval points = hidden_interval(&hidden, tag->found);
        result.low = fmin(share, share_of(tag->count, fmax(points.high - tag->found, 0.0)));
        result.high = fmax(share, share_of(tag->count, fmax(points.low - tag->found, 0.0)));
    }
    return result;
}

double completeness_missing_at(const struct propensity_fit *fit, const struct completeness_tag *tag,
                               double growth)
{
    double p = propensity_fit_tag_mean_at(fit, tag->tag_count, growth, tag->trials, tag->given);
    return missing_of(successes_of(fit, tag), p, tag->found);
}

void completeness_sum_init(struct completeness_sum *sum)
{
    memset(sum, 0, sizeof *sum);
}

void completeness_sum_add(struct completeness_sum *sum, const struct propensity_fit *fit,
                          const struct completeness_tag *tag, double growth)
{
    struct propensity_prior prior =
        propensity_fit_prior_at(fit, tag->tag_count, growth, tag->trials, tag->given);
    double p = p_of(&prior);
    double given = successes_of(fit, tag);
    double missing = missing_of(given, p, tag->found);
    sum->count += tag->count;
    sum->missing += missing;
    sum->trials += tag->trials;
    if (!(missing > 0.0)) {
        return;
    }
    double weight = prior.concentration + prior.trials;
    double alpha = p * (prior.tags + prior.trials);
    /* Var 1/p under Beta(α + 1, β) is (1 - p)/(p²(α - 1)); a small α has none: kept finite. */
    double spread = (1.0 - p) / (p * p);
    sum->variance += given * spread + given * given * spread / fmax(alpha - 1.0, 0.5 * alpha);
    /* dM/dp = -r/p², dp/dm = c/(c + n), dm/dlogit = m(1 - m). */
    double slope =
        -given / (p * p) * prior.concentration / weight * prior.mean * (1.0 - prior.mean);
    struct propensity_place place = propensity_knots_at(prior.others);
    sum->gradient[place.below] += (1.0 - place.share) * slope;
    sum->gradient[place.below + 1] += place.share * slope;
    sum->rarity_slope -= (1.0 - p) / p;
}

void completeness_sum_merge(struct completeness_sum *sum, const struct completeness_sum *part)
{
    sum->count += part->count;
    sum->missing += part->missing;
    sum->variance += part->variance;
    sum->rarity_slope += part->rarity_slope;
    sum->trials += part->trials;
    for (size_t knot = 0; knot < PROPENSITY_KNOTS; knot++) {
        sum->gradient[knot] += part->gradient[knot];
    }
}

struct completeness completeness_of_sum(const struct completeness_sum *sum,
                                        const struct propensity_fit *fit)
{
    double share = share_of(sum->count, sum->missing);
    struct completeness result = {
        .share = share,
        .low = share,
        .high = share,
        .given = sum->count,
        .missing = sum->missing,
        .from =
            fit->trials > 0.0 || sum->trials > 0.0 ? PROPENSITY_FROM_BOTH : PROPENSITY_FROM_CURVE,
    };
    if (sum->missing > 0.0) {
        double rarity = sum->rarity_slope * fit->rarity_spread;
        double variance =
            sum->variance + propensity_fit_variance(fit, sum->gradient) + rarity * rarity;
        double ratio = exp(INTERVAL_Z * sqrt(log1p(variance / (sum->missing * sum->missing))));
        result.low = share_of(sum->count, sum->missing * ratio);
        result.high = share_of(sum->count, sum->missing / ratio);
    }
    return result;
}
