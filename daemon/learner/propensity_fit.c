#include "daemon/learner/propensity_fit.h"

#include <math.h>
#include <stdbool.h>

#include "daemon/learner/beta.h"

static const double LEAST_PROPENSITY = 0.01;
static const double LEAST_CONCENTRATION = 0.5;
static const double LEAST_SINCE = 1000.0;

_Static_assert(sizeof(struct propensity_fit) == PROPENSITY_FIT_DOUBLES * sizeof(double),
               "a fit is stored as doubles");

struct propensity_place propensity_knots_at(double tag_count)
{
    int exponent;
    double half = frexp(fmax(tag_count, 0.0) + 1.0, &exponent);
    if (!(half < 1.0) || exponent >= PROPENSITY_KNOTS) {
        return (struct propensity_place){.below = PROPENSITY_KNOTS - 2, .share = 1.0};
    }
    return (struct propensity_place){.below = (size_t)(exponent - 1), .share = 2.0 * half - 1.0};
}

static double deviation_at(const struct propensity_fit *fit, double tag_count)
{
    struct propensity_place place = propensity_knots_at(tag_count);
    double below = fit->deviation[place.below];
    return below + place.share * (fit->deviation[place.below + 1] - below);
}

double propensity_growth(double documents)
{
    return documents > 0.0 ? fmax(log(documents) - 1.0, 1.0) : 1.0;
}

double propensity_fit_mean_at(const struct propensity_fit *fit, double tag_count, double growth)
{
    double logit = fit->a * log((tag_count + fit->b) / (1.0 + fit->b));
    double odds_against = growth * exp(-logit - deviation_at(fit, tag_count));
    if (!isfinite(odds_against)) {
        return LEAST_PROPENSITY;
    }
    return fmin(fmax(1.0 / (1.0 + odds_against), LEAST_PROPENSITY), 1.0);
}

double propensity_fit_mean(const struct propensity_fit *fit, double tag_count, double documents)
{
    return propensity_fit_mean_at(fit, tag_count, propensity_growth(documents));
}

static double covariance(const struct propensity_fit *fit, size_t row, size_t column)
{
    size_t larger = row > column ? row : column;
    size_t smaller = row > column ? column : row;
    return fit->covariance[larger * (larger + 1) / 2 + smaller];
}

double propensity_fit_variance(const struct propensity_fit *fit,
                               const double gradient[PROPENSITY_KNOTS])
{
    double sum = 0.0;
    for (size_t row = 0; row < PROPENSITY_KNOTS; row++) {
        for (size_t column = 0; column < PROPENSITY_KNOTS; column++) {
            sum += gradient[row] * covariance(fit, row, column) * gradient[column];
        }
    }
    return fmax(sum, 0.0);
}

static double logit_variance(const struct propensity_fit *fit, double tag_count)
{
    struct propensity_place place = propensity_knots_at(tag_count);
    double below = 1.0 - place.share;
    double above = place.share;
    return fmax(below * below * covariance(fit, place.below, place.below) +
                    2.0 * below * above * covariance(fit, place.below + 1, place.below) +
                    above * above * covariance(fit, place.below + 1, place.below + 1),
                0.0);
}

double propensity_fit_logit_spread(const struct propensity_fit *fit, double tag_count)
{
    return sqrt(logit_variance(fit, tag_count));
}

struct propensity_prior propensity_fit_prior_at(const struct propensity_fit *fit, double tag_count,
                                                double growth, double trials, double given)
{
    struct propensity_prior prior = {.trials = trials, .given = given};
    /* One given pair may have been what made the tag known: then it is no trial. */
    if (given >= 1.0 && tag_count - given < 1.0) {
        prior.trials -= 1.0;
        prior.given -= 1.0;
    }
    prior.others = fmax(tag_count - prior.given, fmin(tag_count, 1.0));
    prior.mean = propensity_fit_mean_at(fit, prior.others, growth);
    double spread = prior.mean * (1.0 - prior.mean);
    /* Var p / (m(1 - m)) of a Beta is 1/(κ + 1); the curve's adds to it. */
    prior.tags = fit->concentration;
    double inverse = 1.0 / (fit->concentration + 1.0) + spread * logit_variance(fit, prior.others);
    prior.concentration = fmax(1.0 / inverse - 1.0, LEAST_CONCENTRATION);
    return prior;
}

double propensity_fit_tag_mean_at(const struct propensity_fit *fit, double tag_count, double growth,
                                  double trials, double given)
{
    if (!(trials > 0.0)) {
        return propensity_fit_mean_at(fit, tag_count, growth);
    }
    struct propensity_prior prior = propensity_fit_prior_at(fit, tag_count, growth, trials, given);
    double p =
        (prior.concentration * prior.mean + prior.given) / (prior.concentration + prior.trials);
    return fmin(fmax(p, LEAST_PROPENSITY), 1.0);
}

enum propensity_from propensity_from_what(const struct propensity_fit *fit,
                                          const struct propensity_prior *prior)
{
    if (!(prior->trials > 0.0) && !(fit->trials > 0.0)) {
        return PROPENSITY_FROM_CURVE;
    }
    return prior->trials > prior->concentration ? PROPENSITY_FROM_CHECKS : PROPENSITY_FROM_BOTH;
}

struct propensity_of_tag propensity_fit_tag(const struct propensity_fit *fit, double tag_count,
                                            double documents, double trials, double given)
{
    struct propensity_prior prior = propensity_fit_prior_at(
        fit, tag_count, propensity_growth(documents), fmax(trials, 0.0), given);
    double alpha = prior.concentration * prior.mean + prior.given;
    double beta = prior.concentration * (1.0 - prior.mean) + prior.trials - prior.given;
    double p = fmin(fmax(alpha / (alpha + beta), LEAST_PROPENSITY), 1.0);
    struct propensity_of_tag tag = {
        .p = p,
        .low = p,
        .high = p,
        .concentration = alpha + beta,
        .from = propensity_from_what(fit, &prior),
    };
    if (alpha > 0.0 && beta > 0.0) {
        tag.low = fmin(fmax(beta_quantile(0.05, alpha, beta), LEAST_PROPENSITY), p);
        tag.high = fmax(beta_quantile(0.95, alpha, beta), p);
    }
    return tag;
}

double propensity_late_count(double tag_count, double documents, double documents_since)
{
    double since = fmax(documents_since, fmin(LEAST_SINCE, documents));
    return since > 0.0 ? tag_count * documents / fmin(since, documents) : tag_count;
}
