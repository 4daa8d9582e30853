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
    uint64_t more = wins > losses ? wins : losses;
    uint64_t fewer = wins > losses ? losses : wins;
    uint64_t n = more + fewer;
    if (more == fewer) {
        return 1.0;
    }
    /* From P(X = more) on, each term by the one before; they fall, since more > n/2. */
    double term = exp(log_factorial((double)n) - log_factorial((double)more) -
                      log_factorial((double)fewer) - (double)n * log(2.0));
    double tail = 0.0;
    for (uint64_t k = more; k <= n && term > negligible * tail; k++) {
        tail += term;
        term *= (double)(n - k) / (double)(k + 1);
    }
    return fmin(1.0, 2.0 * tail);
}
