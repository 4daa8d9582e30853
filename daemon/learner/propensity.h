/*
 * propensity: how likely a tag that belongs to an item was in fact given, P(y=1 | y*=1), and what
 * follows for a pair that was not given. Pure functions of numbers; any thread.
 */
#ifndef UNDERTAG_PROPENSITY_H
#define UNDERTAG_PROPENSITY_H

#include <stdint.h>

/* The curve's two parameters; A > 0, B > -1. */
struct propensity_curve {
    double a;
    double b;
};

/* The defaults of the published curve: A = 0.55, B = 1.5. */
struct propensity_curve propensity_curve_default(void);

/*
 * p = 1/(1 + C·(N_l + B)^-A), C = (ln N - 1)(B + 1)^A (Jain, Prabhu, Varma, KDD 2016).
 * `tag_count` is N_l, how often the tag was given unprompted, >= 0 (a share of a count is allowed);
 * `documents` is N, the number of items, >= 0. The formula breaks at small N, so ln N - 1 is taken
 * as at least 1 and p is clipped to [0.01, 1].
 */
double propensity_of_curve(const struct propensity_curve *curve, double tag_count,
                           double documents);

/*
 * P(y*=1 | y=0) = (1 - p)q/(1 - pq) by Bayes' rule: the chance that a tag is missing given that it
 * was not given, where q = P(y*=1 | score) and p the propensity. Both in [0, 1]; where p = q = 1 an
 * ungiven tag is a contradiction and the chance is 0.
 */
double propensity_missing_chance(double propensity, double belongs_chance);

/*
 * A second, optional factor that evens out classes: (1 - β)/(1 - β^n), the inverse of the effective
 * number of samples (Cui et al., CVPR 2019). β in [0, 1): 0 gives 1 (no balance); n >= 1.
 */
double propensity_balance_factor(double beta, double tag_count);

#endif
