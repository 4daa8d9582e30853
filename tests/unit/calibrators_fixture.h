/*
 * calibrators_fixture: calibrators in *state, and evidence by the thousand for them.
 *
 * Bins are .02 wide with their middles at -.97, -.95, … so that -.25 is a middle, of bin 37.
 */
#ifndef UNDERTAG_TESTS_CALIBRATORS_FIXTURE_H
#define UNDERTAG_TESTS_CALIBRATORS_FIXTURE_H

#include "daemon/learner/calibrators.h"

#include <string.h>

#include "tests/unit/near.h"
#include "tests/unit/repeatable.h"

/* The propensities are right: the evidence says nothing against them. */
static const double NO_LEAST[CALIBRATORS_CLASSES];

#define SCORE (-0.25)

enum {
    SCORE_BIN = 37,
    MANY = 1000000000 /* pairs beside which what is believed beforehand weighs nothing */
};

/* Classes by what the tests' propensities make of them. */
enum {
    SURE = 0,   /* p = 1: group 4 */
    LIKELY = 1, /* p = .8: group 3 */
    HALF = 2,   /* p = .5: group 2 */
    LOW = 3,    /* p = .4, and .32 for class 4: group 1 */
    LOWER = 4,
    RARE = 5 /* p = .1, and so are the classes after it: group 0 */
};

static inline int set_up(void **state)
{
    static struct calibrators calibrators;
    calibrators_init(&calibrators);
    *state = &calibrators;
    return 0;
}

static inline void usual_propensities(double *ret_propensities)
{
    static const double first[] = {1.0, 0.8, 0.5, 0.4, 0.32};
    for (size_t c = 0; c < CALIBRATORS_CLASSES; c++) {
        ret_propensities[c] = c < RARE ? first[c] : 0.1;
    }
}

static inline void fit(const struct calibrators *calibrators, struct calibrators_curves *ret_curves)
{
    double propensities[CALIBRATORS_CLASSES];
    usual_propensities(propensities);
    calibrators_fit(calibrators, propensities, NO_LEAST, ret_curves);
}

/* q(score) for a tag of the class. */
static inline double chance_at(const struct calibrators *calibrators, double score,
                               size_t tag_class)
{
    double propensities[CALIBRATORS_CLASSES];
    struct calibrators_curves curves;
    usual_propensities(propensities);
    fit(calibrators, &curves);
    return calibrators_chance(&curves, propensities[tag_class], score);
}

/* One by one. */
static inline void add(struct calibrators *calibrators, double score, size_t tag_class, int pairs,
                       int given)
{
    for (int i = 0; i < pairs; i++) {
        calibrators_add_pair(calibrators, score, tag_class);
    }
    for (int i = 0; i < given; i++) {
        calibrators_add_given(calibrators, score, tag_class);
    }
}

static inline void add_known(struct calibrators *calibrators, double score, size_t tag_class,
                             int pairs, int true_pairs)
{
    for (int i = 0; i < pairs; i++) {
        calibrators_add_known(calibrators, score, tag_class, i < true_pairs);
    }
}

static inline void check_rising(const struct calibrators_curves *curves)
{
    for (size_t g = 0; g < CALIBRATORS_GROUPS; g++) {
        double last = 0.0;
        for (size_t b = 0; b < CALIBRATORS_BINS; b++) {
            double chance = curves->groups[g].chance[b];
            assert_true(chance >= last && chance <= 1.0);
            last = chance;
        }
    }
}

#endif
