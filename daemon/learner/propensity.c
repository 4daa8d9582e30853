#include "daemon/learner/propensity.h"

#include <math.h>

static const double LEAST_PROPENSITY = 0.01;

struct propensity_curve propensity_curve_default(void)
{
    return (struct propensity_curve){.a = 0.55, .b = 1.5};
}

double propensity_of_curve(const struct propensity_curve *curve, double tag_count, double documents)
{
    double growth = documents > 0.0 ? fmax(log(documents) - 1.0, 1.0) : 1.0;
    /* C·(N_l + B)^-A with both powers in one. */
    double odds_against = growth * pow((curve->b + 1.0) / (tag_count + curve->b), curve->a);
    if (!isfinite(odds_against)) {
        return LEAST_PROPENSITY;
    }
    return fmin(fmax(1.0 / (1.0 + odds_against), LEAST_PROPENSITY), 1.0);
}

double propensity_missing_chance(double propensity, double belongs_chance)
{
    double not_given = 1.0 - propensity * belongs_chance;
    if (not_given <= 0.0) {
        return 0.0;
    }
    return (1.0 - propensity) * belongs_chance / not_given;
}

double propensity_balance_factor(double beta, double tag_count)
{
    return (1.0 - beta) / (1.0 - pow(beta, fmax(tag_count, 1.0)));
}
