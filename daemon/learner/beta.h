/*
 * beta: the Beta distribution and intervals made of it. Pure functions of numbers; any thread.
 * 90 % intervals everywhere: 5 % lies below `low` and 5 % above `high`.
 */
#ifndef UNDERTAG_BETA_H
#define UNDERTAG_BETA_H

/* The standard normal's 95 % point: a 90 % interval is this many standard deviations each way. */
#define INTERVAL_Z 1.6448536269514722

struct interval {
    double low;
    double high;
};

/* ln Γ(x), x > 0; unlike lgamma(3) it writes no global. */
double beta_log_gamma(double x);

/*
 * P(X <= x), X ~ Beta(a, b), a, b > 0: the regularised incomplete beta function I_x(a, b), by the
 * continued fraction of DLMF 8.17(v), to about 1e-13. 0 for x <= 0 and 1 for x >= 1.
 */
double beta_cdf(double x, double a, double b);

/*
 * The x with beta_cdf(x, a, b) = probability, by Newton steps kept within a bisection, to about
 * 1e-12 of x. 0 and 1 for probabilities <= 0 and >= 1.
 */
double beta_quantile(double probability, double a, double b);

/*
 * Wilson's score interval (90 %) for a proportion: `hits` of `trials`, fractions allowed,
 * 0 <= hits <= trials; (0, 1) without trials. (Wilson 1927; NIST/SEMATECH e-Handbook 7.2.4.1.)
 */
struct interval proportion_interval(double hits, double trials);

/* The same with another normal quantile z > 0 (1.96 for 95 %). */
struct interval proportion_interval_z(double hits, double trials, double z);

#endif
