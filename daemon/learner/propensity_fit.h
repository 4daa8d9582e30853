/*
 * propensity_fit: the propensity curve fitted to what full checks of items found, how sure it is,
 * and the posterior of one tag around it. Pure functions of numbers; any thread.
 *
 * A tag given N_l times unprompted among N items has
 *     logit p = A·ln((N_l + B)/(1 + B)) - ln growth(N) + d(N_l),  growth = max(ln N - 1, 1),
 * the published curve (Jain, Prabhu, Varma, KDD 2016) written as a logit, and a deviation d, 0
 * until evidence carries one; p is clipped to [0.01, 1]. d is linear in the count between knots at
 * the counts 2^k - 1, and constant beyond the last.
 *
 * A tried pair is read at the count of the tag's other pairs: a given one at N_l - 1, a hidden one
 * at N_l, and none where that is below 1, since only a given pair made such a tag known. (Reading
 * both at N_l calls tags with one use more complete than they are: measured, .157 for .093.)
 * ΣN_l/p then counts the true pairs of all tags, of those nobody has used yet included. A tag that
 * is known hides less: it was seen, and most tags are rare. Where the number of tags that are true
 * of n items falls as n^-(1 + α), U given pairs leave (U - α)(1 - p)/p hidden in the mean (the
 * posterior of n is negative binomial with U - α successes), α being fitted too. On a real corpus
 * thinned by a published curve this took the error of the share of tags used fewer than 30 times
 * from .04 to under .01 (measured; other ways of thinning leave up to .03).
 */
#ifndef UNDERTAG_PROPENSITY_FIT_H
#define UNDERTAG_PROPENSITY_FIT_H

#include <stddef.h>

#include "daemon/learner/propensity.h"

enum {
    PROPENSITY_KNOTS = 18,
    /* A symmetric matrix over knots: row by row, each up to its diagonal. */
    PROPENSITY_COVARIANCES = PROPENSITY_KNOTS * (PROPENSITY_KNOTS + 1) / 2,
    PROPENSITY_FIT_DOUBLES = 8 + PROPENSITY_KNOTS + PROPENSITY_COVARIANCES
};

/*
 * Plain numbers: may be stored and restored as PROPENSITY_FIT_DOUBLES doubles in the order below.
 */
struct propensity_fit {
    double a; /* the curve's A and B */
    double b;
    double concentration;                      /* κ > 0: one tag's p ~ Beta(κm, κ(1 - m)) */
    double deviation_scale;                    /* the step of d per octave that evidence favours */
    double trials;                             /* trials behind the fit; 0: the defaults */
    double documents;                          /* N at the time of the fit; 0: the defaults */
    double rarity;                             /* α in [0, 1), see above */
    double rarity_spread;                      /* its standard deviation */
    double deviation[PROPENSITY_KNOTS];        /* d at the counts 2^k - 1 */
    double covariance[PROPENSITY_COVARIANCES]; /* of the logit at the knots */
};

/* What full checks say of one tag. */
struct propensity_evidence {
    double tag_count; /* N_l today, >= 0 (effective, for a tag opened late) */
    double trials;    /* checked items it truly belongs to; weights make fractions */
    double given;     /* of these, given before the check; 0 <= given <= trials */
};

enum propensity_from {
    PROPENSITY_FROM_CURVE,  /* no check has said anything, of any tag */
    PROPENSITY_FROM_CHECKS, /* this tag's own trials weigh more than the curve */
    PROPENSITY_FROM_BOTH
};

struct propensity_of_tag {
    double p;   /* the posterior's mean, in [0.01, 1] */
    double low; /* its 90 % interval; low <= p <= high */
    double high;
    double concentration; /* α + β of the posterior Beta, own trials included */
    enum propensity_from from;
};

/* The fit without evidence: the mean is propensity_of_curve(curve), the spread the prior's. */
void propensity_fit_default(const struct propensity_curve *curve, struct propensity_fit *ret_fit);

/*
 * The fit to evidence: maximum a posteriori around `defaults`, the deviation's scale chosen by
 * marginal likelihood (Laplace) on a small grid that includes 0 (the fits are averaged with these
 * weights, so that nothing jumps). Never fails, allocates nothing;
 * the order of the tags does not matter, to the last bit. Tags without trials change nothing, so
 * they may be left out; without any trial the result is the default fit. `documents` is N. Takes
 * some milliseconds.
 */
void propensity_fit_evidence(const struct propensity_curve *defaults,
                             const struct propensity_evidence *tags, size_t count, double documents,
                             struct propensity_fit *ret_fit);

/* growth(N) = max(ln N - 1, 1): what the _at functions take, once for many tags. */
double propensity_growth(double documents);

/* p of a tag given `tag_count` times among `documents` items, by the fitted curve; in [0.01, 1]. */
double propensity_fit_mean(const struct propensity_fit *fit, double tag_count, double documents);
double propensity_fit_mean_at(const struct propensity_fit *fit, double tag_count, double growth);

/*
 * The posterior of one tag's p: the curve's Beta updated by the tag's own `trials` and `given`.
 * The mean alone is cheap: no quantile.
 */
struct propensity_of_tag propensity_fit_tag(const struct propensity_fit *fit, double tag_count,
                                            double documents, double trials, double given);
double propensity_fit_tag_mean_at(const struct propensity_fit *fit, double tag_count, double growth,
                                  double trials, double given);

/* What the curve says of one tag, and the trials that are its own. */
struct propensity_prior {
    double others; /* the count without the tag's own given trials: where the curve is read */
    double mean;   /* m, the curve there */
    double tags;   /* κ: how much tags differ around the curve */
    double concentration; /* κ, lowered by the curve's own uncertainty: p ~ Beta(cm, c(1 - m)) */
    double trials;        /* less one where that given pair alone made the tag known */
    double given;
};
struct propensity_prior propensity_fit_prior_at(const struct propensity_fit *fit, double tag_count,
                                                double growth, double trials, double given);

/* What the p that follows from `prior` rests on. */
enum propensity_from propensity_from_what(const struct propensity_fit *fit,
                                          const struct propensity_prior *prior);

/* The standard deviation of the curve's logit at a count. */
double propensity_fit_logit_spread(const struct propensity_fit *fit, double tag_count);

/* Where a count lies between knots: `below` and `below + 1` with weights 1 - share and share. */
struct propensity_place {
    size_t below; /* <= PROPENSITY_KNOTS - 2 */
    double share; /* in [0, 1] */
};
struct propensity_place propensity_knots_at(double tag_count);

/* g' Σ g: the variance of a sum whose derivatives by the logits at the knots are `gradient`. */
double propensity_fit_variance(const struct propensity_fit *fit,
                               const double gradient[PROPENSITY_KNOTS]);

/*
 * The effective count N_l·N/N_since of a tag opened when N - N_since items had been filed; N_since
 * is taken as at least 1,000, or N if that is less. A tag opened by being used has N_since = N.
 */
double propensity_late_count(double tag_count, double documents, double documents_since);

#endif
