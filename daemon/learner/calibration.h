/*
 * calibration: from a score to a chance, q(s) = P(y*=1 | s).
 *
 * Evidence is gathered from progressive scores alone: an item's pairs are scored before they are
 * learned, and what the editor gave is counted by score bin. As tags go missing, a given pair of
 * propensity p stands for 1/p true ones (Horvitz & Thompson 1952), so a bin's target is Σ(y/p)
 * over its pairs; isotonic regression over the bins makes it rise with the score.
 *
 * A tag's propensity drifts as items come in, so what is kept is raw: given pairs by bin and by
 * how common the tag was (a stationary tag keeps its share of the items), divided by the propensity
 * of that share as it is when read. Evidence fades with a half-life, since the learner that made
 * the scores has moved on. Until there is enough, chances lean on a prior (`early`).
 *
 * Pure numbers. The owner of a `struct calibration` says which thread may touch it.
 */
#ifndef UNDERTAG_CALIBRATION_H
#define UNDERTAG_CALIBRATION_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "daemon/learner/propensity.h"

enum {
    CALIBRATION_BINS = 128,
    /* Half octaves of N/N_l, the last one open, and one class for examined pairs (p = 1). */
    CALIBRATION_SHARES = 40,
    CALIBRATION_EXAMINED = CALIBRATION_SHARES,
    CALIBRATION_CLASSES = CALIBRATION_SHARES + 1
};

/*
 * Scores up to this are one bin: a pair at or below it shares too little with the item to be told
 * apart, and need not be counted one by one (calibration_add_rest).
 */
#define CALIBRATION_FLOOR_SCORE (-0.98)

/* Evidence; all in units of `gain`. */
struct calibration_bin {
    double pairs;
    double given[CALIBRATION_CLASSES];
};

struct calibration {
    double gain; /* what one pair counts now; rises so that older evidence fades */
    struct calibration_bin bins[CALIBRATION_BINS];
    uint8_t changed[CALIBRATION_BINS]; /* set when a bin changes; the owner clears it */
};

/* What calibration_fit makes of the evidence. */
struct calibration_curve {
    double chance[CALIBRATION_BINS]; /* rising */
    bool early;                      /* too little evidence: the chances lean on the prior */
};

void calibration_init(struct calibration *calibration);

/* Ages the evidence by one item; half_life_items > 0. Call before an item's pairs are added. */
void calibration_age(struct calibration *calibration, double half_life_items);

/* How common a tag is: its class of N/N_l. tag_count >= 0, documents >= 0. */
size_t calibration_share_class(double tag_count, double documents);

/* Counts one pair scored before it was learned, not given. */
void calibration_add_pair(struct calibration *calibration, double score);

/* Says that a pair counted by calibration_add_pair or _rest was given; `share` is the tag's class.
 */
void calibration_add_given(struct calibration *calibration, double score, size_t share);

/* Counts `pairs` pairs at or below CALIBRATION_FLOOR_SCORE. */
void calibration_add_rest(struct calibration *calibration, double pairs);

/* The chances as of now: today's propensities from `curve` at `documents` items. */
void calibration_fit(const struct calibration *calibration, const struct propensity_curve *curve,
                     double documents, struct calibration_curve *ret_curve);

/* q(s), between the bins' middles by straight lines; flat below the floor and above the last. */
double calibration_chance(const struct calibration_curve *curve, double score);

#endif
