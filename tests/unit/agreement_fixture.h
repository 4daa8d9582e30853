/*
 * agreement_fixture: an agreement in *state, and evidence by the thousand for
 * it.
 */
#ifndef UNDERTAG_TESTS_AGREEMENT_FIXTURE_H
#define UNDERTAG_TESTS_AGREEMENT_FIXTURE_H

#include "daemon/learner/agreement.h"

#include <string.h>

#include "tests/unit/near.h"
#include "tests/unit/repeatable.h"

/* A cell leans on its middle with the weight of so many pairs. */
#define LEAN 20.0

/* Promises in the middle of a row, and chances in the middle of a cell: cells
 * are .5 wide in the logit, their middles at ±.25, ±.75, … ±5.75, the half of
 * them below 0. */
#define NOTHING_PROMISED 0.0
#define SOMETHING_PROMISED 0.45
#define MUCH_PROMISED 5.0

enum {
    SOMETHING_ROW = 2,
    MUCH_ROW = 7,
    MIDDLE_CELL = 12, /* logit .25 */
    PAIRS = 100000
};

static inline double chance_of_logit(double logit)
{
    return 1.0 / (1.0 + exp(-logit));
}

static inline double middle_of(size_t cell)
{
    return chance_of_logit(((double)cell - 11.5) / 2.0);
}

static inline int set_up(void **state)
{
    static struct agreement agreement;
    agreement_init(&agreement);
    *state = &agreement;
    return 0;
}

/* So many pairs of PAIRS, a whole number. */
static inline long times(double probability)
{
    double many = probability * PAIRS;
    assert_near(many, round(many), 1e-6);
    return lround(many);
}

static inline void add_not_given(struct agreement *agreement, double promise, double chance,
                                 long pairs)
{
    for (long i = 0; i < pairs; i++) {
        agreement_add_not_given(agreement, promise, chance);
    }
}

static inline void add_given(struct agreement *agreement, double promise, double chance, double p,
                             long pairs)
{
    for (long i = 0; i < pairs; i++) {
        agreement_add_given(agreement, promise, chance, p);
    }
}

/* Pairs not given in all cells of a row: each then says LEAN/(LEAN + pairs) of
 * its middle. */
static inline void add_throughout(struct agreement *agreement, double promise, long pairs)
{
    for (size_t c = 0; c < AGREEMENT_CHANCES; c++) {
        add_not_given(agreement, promise, middle_of(c), pairs);
    }
}

/* Evidence of all sorts, the same every time. */
static inline void add_anything(struct agreement *agreement, struct repeatable *random, int pairs)
{
    for (int i = 0; i < pairs; i++) {
        double promise = 12.0 * repeatable_share(random) * repeatable_share(random);
        double chance = chance_of_logit(14.0 * repeatable_share(random) - 7.0);
        if (repeatable_share(random) < 0.3) {
            double p = 0.1 + 0.9 * repeatable_share(random);
            agreement_add_given(agreement, promise, chance, p);
        } else {
            agreement_add_not_given(agreement, promise, chance);
        }
    }
}

#endif
