/*
 * standing_tally: the sums of one stretch of items in one band, and what follows from them. Private
 * to standing. Zero-initialised is empty.
 */
#ifndef UNDERTAG_STANDING_TALLY_H
#define UNDERTAG_STANDING_TALLY_H

#include <stddef.h>

#include "daemon/learner/ranking.h"
#include "daemon/learner/standing.h"

/* Over items, of a figure's amount a and basis b. */
struct tally_sums {
    double a;
    double b;
    double aa;
    double bb;
    double ab;
};

/* Over the items that both learners scored; a plain name is the learner's, `without` the shadow's.
 */
struct tally_pair {
    struct tally_sums without;
    double a;
    double aa;
    double cross; /* Σ a_with·a_without */
    double wins;
    double losses;
};

/* Doubles only: it is stored as an array of them, in this order, the end left out where it is 0. */
struct tally {
    double items;
    double paired;
    struct tally_sums with[RANKING_FIGURES];
    struct tally_pair pairs[RANKING_FIGURES];
};

/* Adds one item; `without` may be NULL. */
void tally_item(struct tally *tally, const struct ranking_amounts *bases,
                const struct ranking_amounts *with, const struct ranking_amounts *without);

/* Adds what another tally holds. */
void tally_add(struct tally *tally, const struct tally *other);

struct standing_figure tally_with(const struct tally *tally, enum ranking_figure figure);
struct standing_figure tally_without(const struct tally *tally, enum ranking_figure figure);
struct standing_gain tally_gain(const struct tally *tally, enum ranking_figure figure);

/* As in standing_part_get and standing_part_restore. */
size_t tally_values(const struct tally *tally, double ret_values[STANDING_PART_VALUES]);
int tally_restore(struct tally *tally, const double *values, size_t count)
    __attribute__((warn_unused_result));

#endif
