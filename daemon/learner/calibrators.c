#include "daemon/learner/calibrators.h"

#include <math.h>
#include <string.h>

#include "daemon/learner/isotonic.h"

_Static_assert(sizeof(struct calibrators_bin) == 132 * sizeof(double), "a part has no padding");
_Static_assert(sizeof(struct calibrators_curve) == 129 * sizeof(double), "a part has no padding");

static const double BIN_WIDTH = 0.02;
static const double BINS_PER_SCORE = 50.0;

/*
 * The prior of a bin weighs as much as this many pairs in the pooled curve, and the pooled curve as
 * this many in a group's, of p = 1: a pair of p = .2 says a fifth as much about the truth. Chosen
 * on two thinned corpora from 50 to 50,000 items of evidence.
 */
static const double PRIOR_PAIRS = 3.0;
static const double POOLED_PAIRS = 15.0;

/* With fewer given pairs above the floor the answer is called early. */
static const double ENOUGH_GIVEN = 200.0;

/* The gain is taken back to 1 before it leaves a double's comfortable range. */
static const double LARGEST_GAIN = 1e12;

/* --- evidence -----------------------------------------------------------------------------------
 */

void calibrators_init(struct calibrators *calibrators)
{
    memset(calibrators, 0, sizeof *calibrators);
    calibrators->gain = 1.0;
    memset(calibrators->changed, 1, sizeof calibrators->changed);
}

static void rescale(struct calibrators *calibrators)
{
    double factor = 1.0 / calibrators->gain;
    for (size_t b = 0; b < CALIBRATORS_BINS; b++) {
        for (size_t c = 0; c < CALIBRATORS_CLASSES; c++) {
            struct calibrators_cell *cell = &calibrators->bins[b].cells[c];
            cell->pairs *= factor;
            cell->given *= factor;
            cell->known *= factor;
            cell->known_true *= factor;
            cell->ruled *= factor;
            cell->ruled_true *= factor;
        }
    }
    calibrators->gain = 1.0;
    memset(calibrators->changed, 1, sizeof calibrators->changed);
}

void calibrators_age(struct calibrators *calibrators, double half_life_items)
{
    calibrators->gain *= exp2(1.0 / half_life_items);
    if (calibrators->gain > LARGEST_GAIN) {
        rescale(calibrators);
    }
}

double calibrators_weight(double items, double half_life_items)
{
    return exp2(-items / half_life_items);
}

size_t calibrators_class(uint32_t tag_count, uint64_t documents)
{
    if (tag_count == 0) {
        return CALIBRATORS_CLASSES - 1;
    }
    if (documents <= tag_count) {
        return 0;
    }
    /* A double's exponent is the whole part of its logarithm. */
    double ratio = (double)documents / (double)tag_count;
    uint64_t bits = 0;
    memcpy(&bits, &ratio, sizeof bits);
    size_t octaves = (size_t)(bits >> 52U) - 1023U;
    return octaves < CALIBRATORS_CLASSES ? octaves : CALIBRATORS_CLASSES - 1;
}

double calibrators_class_share(size_t tag_class)
{
    return exp2(-((double)tag_class + 0.5));
}

static size_t bin_of_score(double score)
{
    if (!(score > CALIBRATORS_FLOOR_SCORE)) {
        return 0;
    }
    double above = (score - CALIBRATORS_FLOOR_SCORE) * BINS_PER_SCORE;
    return above >= CALIBRATORS_BINS - 1 ? CALIBRATORS_BINS - 1 : 1 + (size_t)above;
}

double calibrators_middle(size_t bin)
{
    return CALIBRATORS_FLOOR_SCORE + ((double)bin - 0.5) * BIN_WIDTH;
}

static struct calibrators_cell *change(struct calibrators *calibrators, size_t bin,
                                       size_t tag_class)
{
    calibrators->changed[bin] = 1;
    return &calibrators->bins[bin].cells[tag_class];
}

void calibrators_add_pair(struct calibrators *calibrators, double score, size_t tag_class)
{
    change(calibrators, bin_of_score(score), tag_class)->pairs += calibrators->gain;
}

void calibrators_add_rest(struct calibrators *calibrators, size_t tag_class, double pairs)
{
    change(calibrators, 0, tag_class)->pairs += pairs * calibrators->gain;
}

void calibrators_add_given(struct calibrators *calibrators, double score, size_t tag_class)
{
    change(calibrators, bin_of_score(score), tag_class)->given += calibrators->gain;
}

void calibrators_add_known(struct calibrators *calibrators, double score, size_t tag_class,
                           bool belongs)
{
    struct calibrators_cell *cell = change(calibrators, bin_of_score(score), tag_class);
    cell->known += calibrators->gain;
    cell->known_true += belongs ? calibrators->gain : 0.0;
}

void calibrators_add_ruled(struct calibrators *calibrators, double score, size_t tag_class,
                           double weight, bool belongs)
{
    struct calibrators_cell *cell = change(calibrators, bin_of_score(score), tag_class);
    cell->ruled += weight * calibrators->gain;
    cell->ruled_true += belongs ? weight * calibrators->gain : 0.0;
}

void calibrators_rule_rest(struct calibrators *calibrators, size_t tag_class, double weight,
                           double pairs)
{
    change(calibrators, 0, tag_class)->ruled += weight * pairs * calibrators->gain;
}

void calibrators_take_off(struct calibrators *calibrators, double score, size_t tag_class,
                          double weight)
{
    size_t bin = bin_of_score(score);
    size_t at = bin;
    while (at > 0 && calibrators->bins[at].cells[tag_class].given < weight * calibrators->gain) {
        at--;
    }
    bool is_found = calibrators->bins[at].cells[tag_class].given >= weight * calibrators->gain;
    struct calibrators_cell *cell = change(calibrators, is_found ? at : bin, tag_class);
    double taken = fmin(weight * calibrators->gain, cell->given);
    cell->given -= taken;
    cell->pairs = fmax(cell->pairs - taken, 0.0);
    cell->known += taken;
}

/* --- true pairs ---------------------------------------------------------------------------------
 */

/* Of a bin and group, in pairs of now. */
struct estimate {
    double truth; /* true pairs … */
    double pairs; /* … of so many */
    double seen;  /* the sum of p over these, 1 for known ones */
    double given;
};

static double not_given(const struct calibrators_cell *cell)
{
    return cell->pairs > cell->given ? cell->pairs - cell->given : 0.0;
}

/* Rulings stand for no more pairs than there are. */
static double examined(const struct calibrators_cell *cell)
{
    double most = not_given(cell);
    return cell->ruled < most ? cell->ruled : most;
}

static double found(const struct calibrators_cell *cell)
{
    return cell->ruled > 0.0 ? cell->ruled_true * examined(cell) / cell->ruled : 0.0;
}

/*
 * `usual` is λ as it is round about. Where chance gave all of a small cell's pairs nothing is left
 * to examine, and r/u says nothing: taken for 0 it would count hidden ones twice, on the average
 * over what chance may do. So a cell leans on it with the weight of one pair.
 */
static void add_cell(struct estimate *estimate, const struct calibrators_cell *cell,
                     double propensity, double usual, double one)
{
    double lambda = (examined(cell) + usual * one) / (not_given(cell) + one);
    double hidden = (1.0 - lambda) * cell->given * (1.0 - propensity) / propensity;
    estimate->truth += (cell->given + found(cell) + hidden + cell->known_true) / one;
    estimate->pairs += (cell->pairs + cell->known) / one;
    estimate->seen += (cell->pairs * propensity + cell->known) / one;
    estimate->given += cell->given / one;
}

/* The λ of each group round about a bin: a running mean from the bins below it, `usual`, moves on.
 */
static void move_usual(const struct calibrators_bin *bin, const size_t *group_of_class, double one,
                       double usual[CALIBRATORS_GROUPS])
{
    double examined_sums[CALIBRATORS_GROUPS];
    double not_given_sums[CALIBRATORS_GROUPS];
    for (size_t g = 0; g < CALIBRATORS_GROUPS; g++) {
        examined_sums[g] = usual[g] * one;
        not_given_sums[g] = one;
    }
    for (size_t c = 0; c < CALIBRATORS_CLASSES; c++) {
        examined_sums[group_of_class[c]] += examined(&bin->cells[c]);
        not_given_sums[group_of_class[c]] += not_given(&bin->cells[c]);
    }
    for (size_t g = 0; g < CALIBRATORS_GROUPS; g++) {
        usual[g] = examined_sums[g] / not_given_sums[g];
    }
}

/* By group and bin, in pairs of now. */
static void estimate_groups(const struct calibrators *calibrators, const double *believed,
                            const double *least,
                            struct estimate estimates[CALIBRATORS_GROUPS][CALIBRATORS_BINS])
{
    const double one = calibrators->gain;
    size_t group_of_class[CALIBRATORS_CLASSES];
    double usual[CALIBRATORS_GROUPS] = {0.0};
    memset(estimates, 0, CALIBRATORS_GROUPS * sizeof estimates[0]);
    for (size_t c = 0; c < CALIBRATORS_CLASSES; c++) {
        group_of_class[c] = calibrators_group(believed[c]);
    }
    for (size_t b = 0; b < CALIBRATORS_BINS; b++) {
        const struct calibrators_bin *bin = &calibrators->bins[b];
        move_usual(bin, group_of_class, one, usual);
        for (size_t c = 0; c < CALIBRATORS_CLASSES; c++) {
            if (bin->cells[c].pairs > 0.0 || bin->cells[c].known > 0.0) {
                size_t g = group_of_class[c];
                add_cell(&estimates[g][b], &bin->cells[c], fmax(believed[c], least[c]), usual[g],
                         one);
            }
        }
    }
}

/* --- chances ------------------------------------------------------------------------------------
 */

static const double CUTS[CALIBRATORS_GROUPS - 1] = {0.3, 0.5, 0.7, 0.85};

size_t calibrators_group(double propensity)
{
    size_t group = 0;
    for (size_t i = 0; i < CALIBRATORS_GROUPS - 1; i++) {
        group += propensity >= CUTS[i] ? 1 : 0;
    }
    return group;
}

/*
 * What is believed of a score before there is evidence: the shape that fitted curves of two corpora
 * have had, from their first fifty items on: next to nothing at the floor, a third half way to 0,
 * likely at 0, nearly sure at 1.
 */
static double prior_chance(double score)
{
    static const struct {
        double score;
        double chance;
    } knots[] = {{-0.98, 0.0005}, {-0.8, 0.05}, {-0.5, 0.35}, {0.0, 0.8}, {0.5, 0.93}, {1.0, 0.97}};
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

/* A rising curve through the estimates, each leaning on chance[b] with the weight of `pairs` of
 * p = 1; replaces chance. */
static void fit_curve(const struct estimate *estimates, double pairs, double *chance)
{
    double weights[CALIBRATORS_BINS];
    struct isotonic_pool pools[CALIBRATORS_BINS];
    for (size_t b = 0; b < CALIBRATORS_BINS; b++) {
        /* Over the mean of p; an empty bin's is 1. */
        double lean = pairs * (estimates[b].pairs + 1.0) / (estimates[b].seen + 1.0);
        weights[b] = estimates[b].pairs + lean;
        chance[b] = (estimates[b].truth + lean * chance[b]) / weights[b];
    }
    isotonic_fit(chance, weights, pools, CALIBRATORS_BINS);
    /* Only now: a bin that chance has carried above 1 makes up for its neighbours first. */
    for (size_t b = 0; b < CALIBRATORS_BINS; b++) {
        chance[b] = fmin(chance[b], 1.0);
    }
}

static void fit_pooled(struct estimate estimates[CALIBRATORS_GROUPS][CALIBRATORS_BINS],
                       double chance[CALIBRATORS_BINS])
{
    struct estimate pooled[CALIBRATORS_BINS];
    memset(pooled, 0, sizeof pooled);
    for (size_t b = 0; b < CALIBRATORS_BINS; b++) {
        for (size_t g = 0; g < CALIBRATORS_GROUPS; g++) {
            pooled[b].truth += estimates[g][b].truth;
            pooled[b].pairs += estimates[g][b].pairs;
            pooled[b].seen += estimates[g][b].seen;
        }
        chance[b] = prior_chance(calibrators_middle(b));
    }
    fit_curve(pooled, PRIOR_PAIRS, chance);
}

void calibrators_fit(const struct calibrators *calibrators,
                     const double believed[CALIBRATORS_CLASSES],
                     const double least[CALIBRATORS_CLASSES], struct calibrators_curves *ret_curves)
{
    struct estimate estimates[CALIBRATORS_GROUPS][CALIBRATORS_BINS];
    double pooled[CALIBRATORS_BINS];
    estimate_groups(calibrators, believed, least, estimates);
    fit_pooled(estimates, pooled);
    for (size_t g = 0; g < CALIBRATORS_GROUPS; g++) {
        struct calibrators_curve *curve = &ret_curves->groups[g];
        memcpy(curve->chance, pooled, sizeof pooled);
        fit_curve(estimates[g], POOLED_PAIRS, curve->chance);
        curve->given = 0.0;
        for (size_t b = 1; b < CALIBRATORS_BINS; b++) {
            curve->given += estimates[g][b].given;
        }
    }
}

double calibrators_cut(size_t group)
{
    return CUTS[group];
}

bool calibrators_early(const struct calibrators_curves *curves)
{
    double given = 0.0;
    for (size_t g = 0; g < CALIBRATORS_GROUPS; g++) {
        given += curves->groups[g].given;
    }
    return given < ENOUGH_GIVEN;
}

static double chance_on_curve(const struct calibrators_curve *curve, double score)
{
    size_t bin = bin_of_score(score);
    if (bin == 0) {
        return curve->chance[0];
    }
    double off_middle = (score - calibrators_middle(bin)) * BINS_PER_SCORE;
    size_t other = off_middle < 0.0 ? bin - 1 : bin + 1;
    if (other >= CALIBRATORS_BINS || other == 0) {
        return curve->chance[bin];
    }
    double share = fabs(off_middle);
    return (1.0 - share) * curve->chance[bin] + share * curve->chance[other];
}

double calibrators_chance(const struct calibrators_curves *curves, double propensity, double score)
{
    return chance_on_curve(&curves->groups[calibrators_group(propensity)], score);
}
