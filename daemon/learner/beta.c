#include "daemon/learner/beta.h"

#include <float.h>
#include <math.h>
#include <stdbool.h>

enum {
    FRACTION_STEPS = 20000,
    QUANTILE_STEPS = 200
};

double beta_log_gamma(double x)
{
    int sign;
    return lgamma_r(x, &sign);
}

static double log_beta(double a, double b)
{
    return beta_log_gamma(a) + beta_log_gamma(b) - beta_log_gamma(a + b);
}

static double away_from_zero(double x)
{
    return fabs(x) < DBL_MIN ? DBL_MIN : x;
}

/* DLMF 8.17.22 with its coefficients d_n, by the modified Lentz method. */
static double fraction(double x, double a, double b)
{
    double upper = 1.0;
    double lower = 1.0 / away_from_zero(1.0 - (a + b) * x / (a + 1.0));
    double value = lower;
    for (int m = 1; m <= FRACTION_STEPS; m++) {
        double even = m * (b - m) * x / ((a + 2.0 * m - 1.0) * (a + 2.0 * m));
        double odd = -(a + m) * (a + b + m) * x / ((a + 2.0 * m) * (a + 2.0 * m + 1.0));
        lower = 1.0 / away_from_zero(1.0 + even * lower);
        upper = away_from_zero(1.0 + even / upper);
        value *= lower * upper;
        lower = 1.0 / away_from_zero(1.0 + odd * lower);
        upper = away_from_zero(1.0 + odd / upper);
        value *= lower * upper;
        if (fabs(lower * upper - 1.0) < 1e-15) {
            break;
        }
    }
    return value;
}

static double log_density(double x, double a, double b)
{
    return (a - 1.0) * log(x) + (b - 1.0) * log1p(-x) - log_beta(a, b);
}

double beta_cdf(double x, double a, double b)
{
    if (!(x > 0.0)) {
        return 0.0;
    }
    if (x >= 1.0) {
        return 1.0;
    }
    double front = exp(a * log(x) + b * log1p(-x) - log_beta(a, b));
    /* The fraction converges fast on the side of the mean; the other is its complement. */
    if (x < (a + 1.0) / (a + b + 2.0)) {
        return fmin(front * fraction(x, a, b) / a, 1.0);
    }
    return fmax(1.0 - front * fraction(1.0 - x, b, a) / b, 0.0);
}

double beta_quantile(double probability, double a, double b)
{
    if (!(probability > 0.0)) {
        return 0.0;
    }
    if (probability >= 1.0) {
        return 1.0;
    }
    double low = 0.0;
    double high = 1.0;
    double x = a / (a + b);
    for (int step = 0; step < QUANTILE_STEPS; step++) {
        double excess = beta_cdf(x, a, b) - probability;
        if (excess > 0.0) {
            high = x;
        } else {
            low = x;
        }
        double next = x - excess / exp(log_density(x, a, b));
        if (!(next > low && next < high)) {
            next = 0.5 * (low + high);
        }
        bool settled = fabs(next - x) <= 1e-14 * x || high - low <= 1e-15 * high;
        x = next;
        if (settled) {
            break;
        }
    }
    return x;
}

struct interval proportion_interval_z(double hits, double trials, double z)
{
    if (!(trials > 0.0)) {
        return (struct interval){.low = 0.0, .high = 1.0};
    }
    double share = hits / trials;
    double z2 = z * z / trials;
    double middle = share + 0.5 * z2;
    double half = z * sqrt(share * (1.0 - share) / trials + 0.25 * z2 / trials);
    /* Exact where rounding would leave a speck. */
    return (struct interval){
        .low = hits > 0.0 ? fmax((middle - half) / (1.0 + z2), 0.0) : 0.0,
        .high = hits < trials ? fmin((middle + half) / (1.0 + z2), 1.0) : 1.0,
    };
}

struct interval proportion_interval(double hits, double trials)
{
    return proportion_interval_z(hits, trials, INTERVAL_Z);
}
