/*
 * calibrators: from a score to a chance, q(s) = P(y*=1 | s), one calibrator per propensity group.
 *
 * Evidence is gathered from progressive scores alone: an item's pairs are scored before they are
 * learned, and counted by score bin and by how common the tag is (octaves of N/N_l: a stationary
 * tag stays in its class). It is kept raw and read with the propensity that each class has today;
 * classes of similar propensity form a group. Evidence fades with a half-life, since the learner
 * that made the scores has moved on.
 *
 * Of a cell's pairs that nobody examined when they were filed, n, some were given (g), and of the
 * others, u = n - g, some were examined later (r), and t of those do belong. Its true pairs are
 *
 *     g + t + (1 - λ)·g·(1 - p)/p,    λ = r/u,
 *
 * what was seen, what was found, and what hides among those that nobody examined. Without rulings
 * that is g/p (Horvitz & Thompson 1952); with all of the others examined it is a plain count. It is
 * linear in g and t, so small bins are not biased by being cut to [0, 1]. A ruling stands for
 * itself alone: those on gaps fall on the likeliest pairs, and say little about the others. (By
 * simulation the likeliest q has less variance where rulings fall at random, but up to twice
 * the bias where they do not.) Cells of few pairs lean on the λ round about them, see
 * calibrators.c.
 *
 * Pairs that were known when filed (prompted or declined) are counted as they are, p = 1.
 *
 * Pure numbers. The owner of a `struct calibrators` says which thread may touch it.
 */
#ifndef UNDERTAG_CALIBRATORS_H
#define UNDERTAG_CALIBRATORS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum {
    CALIBRATORS_BINS = 128,
    CALIBRATORS_CLASSES = 22, /* octaves of N/N_l, the last one open */
    CALIBRATORS_GROUPS = 5    /* of the propensity, cut at .3, .5, .7 and .85 */
};

/*
 * Scores up to this are one bin, number 0: a pair at or below it shares too little with the item to
 * be told apart, and need not be counted one by one (calibrators_add_rest).
 */
#define CALIBRATORS_FLOOR_SCORE (-0.98)

/* --- evidence -----------------------------------------------------------------------------------
 */

/* The pairs of one bin and class, in units of `gain`. Nothing is below 0. */
struct calibrators_cell {
    double pairs;      /* scored before learned, not examined when filed */
    double given;      /* of those: given */
    double known;      /* examined when filed; none of `pairs` */
    double known_true; /* of those: belong */
    double ruled;      /* of `pairs`: not given, examined later */
    double ruled_true; /* of those: belong */
};

/* One part for the store: 132 doubles, 1,056 bytes, nothing else. */
struct calibrators_bin {
    struct calibrators_cell cells[CALIBRATORS_CLASSES];
};

/* All of it is plain data. Restored from `gain` and the bins, it is the same bit by bit. */
struct calibrators {
    double gain; /* what one pair counts now; rises so that older evidence fades */
    struct calibrators_bin bins[CALIBRATORS_BINS];
    uint8_t changed[CALIBRATORS_BINS]; /* set when a bin changes; the owner clears it */
};

void calibrators_init(struct calibrators *calibrators);

/* Ages the evidence by one item; half_life_items > 0. Call before an item's pairs are added. */
void calibrators_age(struct calibrators *calibrators, double half_life_items);

/* What a pair counted `items` ago still weighs: 2^(-items/half_life_items); both >= 0, the
 * half-life above 0. */
double calibrators_weight(double items, double half_life_items);

/* The class of a tag: floor(log2(N/N_l)) within 0 … 21; N_l = 0 is in the last. */
size_t calibrators_class(uint32_t tag_count, uint64_t documents);

/* N_l/N of a tag in the middle of a class: the caller makes the class's propensity of it. */
double calibrators_class_share(size_t tag_class);

/* Counts one pair scored before it was learned, not examined. tag_class < CALIBRATORS_CLASSES here
 * and below. */
void calibrators_add_pair(struct calibrators *calibrators, double score, size_t tag_class);

/* Counts `pairs` pairs at the floor likewise, pairs >= 0. */
void calibrators_add_rest(struct calibrators *calibrators, size_t tag_class, double pairs);

/* Says that a pair counted by one of the two was given. Same score and class. */
void calibrators_add_given(struct calibrators *calibrators, double score, size_t tag_class);

/* Counts a pair that was examined when filed, and by none of the functions above: prompted
 * (belongs) or declined (does not). */
void calibrators_add_known(struct calibrators *calibrators, double score, size_t tag_class,
                           bool belongs);

/*
 * Says that a pair counted by calibrators_add_pair or _rest and not given has been examined: a
 * ruling on a gap, or a spot check. Score and class are those it was counted with; `weight` is its
 * calibrators_weight, 1 for a pair of the latest item.
 */
void calibrators_add_ruled(struct calibrators *calibrators, double score, size_t tag_class,
                           double weight, bool belongs);

/* Says that `pairs` of the pairs counted by calibrators_add_rest have been examined: none belongs.
 */
void calibrators_rule_rest(struct calibrators *calibrators, size_t tag_class, double weight,
                           double pairs);

/* Says that a pair counted as given was wrongly given: it becomes a known one that does not belong.
 * Class and weight as above. The score may be that of today: the pair is looked for from its bin
 * downwards, since learning a given pair has only raised it. */
void calibrators_take_off(struct calibrators *calibrators, double score, size_t tag_class,
                          double weight);

/* --- chances ------------------------------------------------------------------------------------
 */

/* The calibrator of one group. One part for the store: 129 doubles, 1,032 bytes, nothing else. */
struct calibrators_curve {
    double chance[CALIBRATORS_BINS]; /* rising, within 0 … 1 */
    double given;                    /* given pairs above the floor behind it */
};

/* What calibrators_fit makes of the evidence: plain data, five parts. */
struct calibrators_curves {
    struct calibrators_curve groups[CALIBRATORS_GROUPS];
};

/*
 * The least propensity that each class can have: of the pairs above any score, more than p of them
 * cannot have been given. The lower limit of Wilson's interval with z = 2.3, the greatest over
 * all scores; 0 where little is known. Where it lies above what is believed of a class, more was
 * given than that belief allows.
 */
void calibrators_least(const struct calibrators *calibrators,
                       double ret_least[CALIBRATORS_CLASSES]);

/* The group of a propensity: 0 below .3, … 4 from .85; and the propensity from which the group
 * after `group` begins, group < CALIBRATORS_GROUPS - 1. */
size_t calibrators_group(double propensity);
double calibrators_cut(size_t group);

/*
 * The chances as of now. `believed` are the classes' propensities, above 0 and at most 1, which
 * make the groups; a given pair counts by them, or by `least` (calibrators_least) where that is
 * more.
 */
void calibrators_fit(const struct calibrators *calibrators,
                     const double believed[CALIBRATORS_CLASSES],
                     const double least[CALIBRATORS_CLASSES],
                     struct calibrators_curves *ret_curves);

/* Whether there is too little evidence, and the chances lean on the prior: fewer than 200 given
 * pairs above the floor in all. */
bool calibrators_early(const struct calibrators_curves *curves);

/* The score in the middle of a bin, 0 < bin < CALIBRATORS_BINS. */
double calibrators_middle(size_t bin);

/* q(s) for a tag of this propensity: between the bins' middles by straight lines; flat below the
 * floor and above the last. */
double calibrators_chance(const struct calibrators_curves *curves, double propensity, double score);

#endif
