/*
 * propensity_private: what the files of propensity_fit share.
 */
#ifndef UNDERTAG_PROPENSITY_PRIVATE_H
#define UNDERTAG_PROPENSITY_PRIVATE_H

#include "daemon/learner/census.h"
#include "daemon/learner/propensity_fit.h"

/* Trials by the count of the tag's other pairs. */
struct propensity_bins {
    double given[CENSUS_BINS];
    double hidden[CENSUS_BINS];
    double count[CENSUS_BINS]; /* the mean count of a bin's trials */
};

/*
 * Sets `fit`'s a, b, deviation, deviation_scale and covariance to the posterior's; bin 0 is not
 * read. The defaults' spread follows from empty bins.
 */
void propensity_solve(const struct propensity_curve *defaults, double growth,
                      const struct propensity_bins *bins, struct propensity_fit *fit);

#endif
