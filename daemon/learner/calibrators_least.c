/*
 * What the evidence says against the propensities: no more than all of the pairs above a score can
 * belong, so the share of them that was given is at most p. (As for positive and unlabelled
 * examples: where all belong, the share given is p; Elkan & Noto, KDD 2008.)
 */
#include <math.h>

#include "daemon/learner/beta.h"
#include "daemon/learner/calibrators.h"

/*
 * A limit that chance passes once in some 90 times, and as the greatest of many is taken, in 5 to
 * 10 of 100 classes (by .08 at most, in a simulation). It is no test: too high a limit costs
 * little, and one that is passed in 1 of 1,000 leaves W's complete tags to the curve, P@1 .873, not
 * .882.
 */
static const double SURE_Z = 2.3;

/* Fewer pairs say nothing. */
static const double LEAST_PAIRS = 20.0;

static double least_of_class(const struct calibrators *calibrators, size_t class)
{
    double pairs = 0.0;
    double given = 0.0;
    double least = 0.0;
    for (size_t b = CALIBRATORS_BINS; b-- > 1;) {
        const struct calibrators_cell *cell = &calibrators->bins[b].cells[class];
        pairs += cell->pairs / calibrators->gain;
        given += cell->given / calibrators->gain;
        if (pairs >= LEAST_PAIRS) {
            least = fmax(least, proportion_interval_z(fmin(given, pairs), pairs, SURE_Z).low);
        }
    }
    return least;
}

void calibrators_least(const struct calibrators *calibrators, double ret_least[CALIBRATORS_CLASSES])
{
    for (size_t c = 0; c < CALIBRATORS_CLASSES; c++) {
        ret_least[c] = least_of_class(calibrators, c);
    }
}
