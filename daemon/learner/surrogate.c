#include "daemon/learner/surrogate.h"

#include <math.h>

/* Beyond this the logistic loss and its slope are below a double's precision. */
static const double LOGISTIC_FLAT_MARGIN = 36.0;

double surrogate_loss(enum surrogate kind, double margin)
{
    switch (kind) {
    case SURROGATE_HINGE:
        return margin < 1.0 ? 1.0 - margin : 0.0;
    case SURROGATE_LOGISTIC:
        /* ln(1 + e^-m) without overflow on either side. */
        return margin > 0.0 ? log1p(exp(-margin)) : -margin + log1p(exp(margin));
    case SURROGATE_SQUARED_HINGE:
        break;
    }
    return margin < 1.0 ? (1.0 - margin) * (1.0 - margin) : 0.0;
}

double surrogate_slope(enum surrogate kind, double margin)
{
    switch (kind) {
    case SURROGATE_HINGE:
        return margin < 1.0 ? -1.0 : 0.0;
    case SURROGATE_LOGISTIC:
        return -1.0 / (1.0 + exp(margin));
    case SURROGATE_SQUARED_HINGE:
        break;
    }
    return margin < 1.0 ? -2.0 * (1.0 - margin) : 0.0;
}

/*
 * Newton's method on f(z) = z + e^(m+z) - hD - e^m, z = αD. f is convex and rising, and the start
 * lies right of the root (both z <= hD and e^(m+z) <= hD + e^m hold there), so it falls to the root
 * without overshooting.
 */
static double logistic_step(double margin, double factor, double curvature)
{
    if (margin > LOGISTIC_FLAT_MARGIN) {
        return 0.0;
    }
    double total = factor * curvature;
    double goal = total + exp(margin);
    double z = fmin(total, log(goal) - margin);
    for (int i = 0; i < 12; i++) {
        double rise = exp(margin + z);
        double move = (z + rise - goal) / (1.0 + rise);
        z -= move;
        if (fabs(move) <= 1e-12 * (1.0 + fabs(z))) {
            break;
        }
    }
    return fmax(z, 0.0) / curvature;
}

double surrogate_step(enum surrogate kind, double margin, double factor, double curvature)
{
    if (kind == SURROGATE_LOGISTIC) {
        return logistic_step(margin, factor, curvature);
    }
    if (margin >= 1.0) {
        return 0.0;
    }
    if (kind == SURROGATE_HINGE) {
        return fmin(factor, (1.0 - margin) / curvature);
    }
    return (1.0 - margin) * -expm1(-2.0 * factor * curvature) / curvature;
}

double surrogate_given_factor(double propensity)
{
    return 2.0 / propensity - 1.0;
}
