#include "daemon/learner/calibration.h"

#include <math.h>
#include <string.h>

#include "daemon/learner/isotonic.h"

static const double BIN_WIDTH = 0.02;

/* The prior of a bin weighs as much as this many pairs. */
static const double PRIOR_PAIRS = 10.0;

/* With fewer given pairs above the floor the answer is called early. */
static const double ENOUGH_GIVEN = 200.0;

/* The gain is taken back to 1 before it leaves a double's comfortable range. */
static const double LARGEST_GAIN = 1e12;

void calibration_init(struct calibration *calibration)
{
    memset(calibration, 0, sizeof *calibration);
    calibration->gain = 1.0;
    memset(calibration->changed, 1, sizeof calibration->changed);
}

static void rescale(struct calibration *calibration)
{
    double factor = 1.0 / calibration->gain;
    for (size_t b = 0; b < CALIBRATION_BINS; b++) {
        calibration->bins[b].pairs *= factor;
        for (size_t c = 0; c < CALIBRATION_CLASSES; c++) {
            calibration->bins[b].given[c] *= factor;
        }
    }
    calibration->gain = 1.0;
    memset(calibration->changed, 1, sizeof calibration->changed);
}

void calibration_age(struct calibration *calibration, double half_life_items)
{
    calibration->gain *= exp2(1.0 / half_life_items);
    if (calibration->gain > LARGEST_GAIN) {
        rescale(calibration);
    }
}

static size_t bin_of_score(double score)
{
    if (!(score > CALIBRATION_FLOOR_SCORE)) {
        return 0;
    }
    double above = (score - CALIBRATION_FLOOR_SCORE) / BIN_WIDTH;
    return above >= CALIBRATION_BINS - 1 ? CALIBRATION_BINS - 1 : 1 + (size_t)above;
}

static double middle_of_bin(size_t bin)
{
    return CALIBRATION_FLOOR_SCORE + ((double)bin - 0.5) * BIN_WIDTH;
}

size_t calibration_share_class(double tag_count, double documents)
{
    if (tag_count <= 0.0 || documents <= tag_count) {
        return tag_count <= 0.0 ? CALIBRATION_SHARES - 1 : 0;
    }
    double half_octaves = 2.0 * log2(documents / tag_count);
    return half_octaves >= CALIBRATION_SHARES ? CALIBRATION_SHARES - 1 : (size_t)half_octaves;
}

/* Today's propensity of a class: that of a tag in the middle of its share of the items. */
static double class_propensity(const struct propensity_curve *curve, size_t class, double documents)
{
    if (class == CALIBRATION_EXAMINED) {
        return 1.0;
    }
    double share = exp2(-((double)class + 0.5) / 2.0);
    return propensity_of_curve(curve, share * documents, documents);
}

void calibration_add_pair(struct calibration *calibration, double score)
{
    size_t bin = bin_of_score(score);
    calibration->bins[bin].pairs += calibration->gain;
    calibration->changed[bin] = 1;
}

void calibration_add_given(struct calibration *calibration, double score, size_t share)
{
    size_t bin = bin_of_score(score);
    calibration->bins[bin].given[share] += calibration->gain;
    calibration->changed[bin] = 1;
}

void calibration_add_rest(struct calibration *calibration, double pairs)
{
    calibration->bins[0].pairs += pairs * calibration->gain;
    calibration->changed[0] = 1;
}

/*
 * What is believed of a score before there is evidence: the shape that fitted curves of large
 * corpora have had in our trials, next to nothing at the floor, a half at 0, nearly sure at 1.
 */
static double prior_chance(double score)
{
    static const struct {
        double score;
        double chance;
    } knots[] = {{-0.98, 0.0005}, {-0.8, 0.01}, {-0.5, 0.10}, {0.0, 0.5}, {0.5, 0.8}, {1.0, 0.95}};
    const size_t count = sizeof knots / sizeof knots[0];
    if (score <= knots[0].score) {
        return knots[0].chance;
    }
    for (size_t i = 1; i < count; i++) {
        if (score <= knots[i].score) {
            double along = (score - knots[i - 1].score) / (knots[i].score - knots[i - 1].score);
            return knots[i - 1].chance + along * (knots[i].chance - knots[i - 1].chance);
        }
    }
    return knots[count - 1].chance;
}

void calibration_fit(const struct calibration *calibration, const struct propensity_curve *curve,
                     double documents, struct calibration_curve *ret_curve)
{
    double propensities[CALIBRATION_CLASSES];
    for (size_t c = 0; c < CALIBRATION_CLASSES; c++) {
        propensities[c] = class_propensity(curve, c, documents);
    }
    double weights[CALIBRATION_BINS];
    double given_above_floor = 0.0;
    for (size_t b = 0; b < CALIBRATION_BINS; b++) {
        const struct calibration_bin *bin = &calibration->bins[b];
        double truth = 0.0;
        for (size_t c = 0; c < CALIBRATION_CLASSES; c++) {
            truth += bin->given[c] / propensities[c];
            given_above_floor += b > 0 ? bin->given[c] : 0.0;
        }
        weights[b] = bin->pairs / calibration->gain + PRIOR_PAIRS;
        double prior = PRIOR_PAIRS * prior_chance(middle_of_bin(b));
        ret_curve->chance[b] = (truth / calibration->gain + prior) / weights[b];
    }
    struct isotonic_pool pools[CALIBRATION_BINS];
    isotonic_fit(ret_curve->chance, weights, pools, CALIBRATION_BINS);
    /* Only now: a bin that y/p has carried above 1 makes up for its neighbours first. */
    for (size_t b = 0; b < CALIBRATION_BINS; b++) {
        ret_curve->chance[b] = fmin(ret_curve->chance[b], 1.0);
    }
    ret_curve->early = given_above_floor / calibration->gain < ENOUGH_GIVEN;
}

double calibration_chance(const struct calibration_curve *curve, double score)
{
    size_t bin = bin_of_score(score);
    if (bin == 0) {
        return curve->chance[0];
    }
    double off_middle = (score - middle_of_bin(bin)) / BIN_WIDTH;
    size_t other = off_middle < 0.0 ? bin - 1 : bin + 1;
    if (other >= CALIBRATION_BINS || other == 0) {
        return curve->chance[bin];
    }
    double share = fabs(off_middle);
    return (1.0 - share) * curve->chance[bin] + share * curve->chance[other];
}
