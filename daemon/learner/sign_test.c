#include "daemon/learner/sign_test.h"

#include <math.h>

/* ln(n!); lgamma itself would write a global. */
static double log_factorial(double n)
{
    int sign = 0;
    return lgamma_r(n + 1.0, &sign);
}

double sign_test(uint64_t wins, uint64_t losses)
{
    static const double negligible = 1e-17;
    double more = (double)(wins > losses ? wins : losses);
    double fewer = (double)(wins > losses ? losses : wins);
    if (more <= fewer) {
        return 1.0;
    }
    /* From P(X = more) on, each term by the one before; they fall, since more > n/2. */
    double n = more + fewer;
    double term = exp(log_factorial(n) - log_factorial(more) - log_factorial(fewer) - n * log(2.0));
    double tail = 0.0;
    for (double k = more; k <= n && term > negligible * tail; k += 1.0) {
        tail += term;
        term *= (n - k) / (k + 1.0);
    }
    return fmin(1.0, 2.0 * tail);
}
