/*
 * surrogate: the convex loss that stands in for 0-1 loss, and the step that one example asks for.
 *
 * The margin is m = y·s, with y = +1 where the tag is given and -1 where it is not, and s the
 * score. Pure functions of numbers; any thread.
 */
#ifndef UNDERTAG_SURROGATE_H
#define UNDERTAG_SURROGATE_H

enum surrogate {
    SURROGATE_SQUARED_HINGE,
    SURROGATE_HINGE,
    SURROGATE_LOGISTIC
};

/* φ(m): squared hinge max(0, 1 - m)², hinge max(0, 1 - m), logistic ln(1 + e^-m). */
double surrogate_loss(enum surrogate kind, double margin);

/* dφ/dm, at most 0; at the hinge's kink (m = 1) it is 0. */
double surrogate_slope(enum surrogate kind, double margin);

/*
 * The importance-aware step α for an example that counts `factor` times (h >= 0): what infinitely
 * many infinitely small gradient steps of total length h would add up to along the example
 * (Karampatziakis & Langford, UAI 2011). `curvature` is D = Σ rate_i·x_i² over the example's
 * weights, bias included, above 0. Each weight then moves by y·α·rate_i·x_i, so that the margin
 * grows by α·D:
 *
 *   hinge          α = min(h, (1 - m)/D)
 *   squared hinge  α = (1 - m)(1 - e^(-2hD))/D
 *   logistic       the solution of αD + e^(m + αD) = hD + e^m
 *
 * Where there is no loss (m >= 1 for the hinges) the step is 0.
 */
double surrogate_step(enum surrogate kind, double margin, double factor, double curvature);

/*
 * What one observation of a given pair counts for when tags go missing: 2/p - 1, with p the tag's
 * propensity in (0, 1]. From making 0-1 loss unbiased under P(y=1 | y*=1) = p, P(y=1 | y*=0) = 0
 * (Natarajan et al., NeurIPS 2013) and bounding it by φ afterwards; a pair not given counts once.
 */
double surrogate_given_factor(double propensity);

#endif
