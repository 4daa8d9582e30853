#include "daemon/learner/agreement.h"

#include <math.h>
#include <string.h>

#include "daemon/learner/isotonic.h"

/* A cell leans on the chance that it is the cell of with the weight of so many pairs. */
static const double LEAN_PAIRS = 20.0;

/* Cells are this wide in the logit of the chance, and centred on 0. */
static const double CELL_WIDTH = 0.5;

/* Nobody has seen enough to be surer that a tag is missing. */
static const double SUREST = 0.99;

static const double LARGEST_GAIN = 1e12;

/* A cell's place as a number, its middle being a whole one; from 0 to the last. */
static double place_of(double chance)
{
    const double last = AGREEMENT_CHANCES - 1;
    double within = fmin(fmax(chance, 1e-9), 1.0 - 1e-9);
    double place = log(within / (1.0 - within)) / CELL_WIDTH + last / 2.0;
    return fmin(fmax(place, 0.0), last);
}

double agreement_cell_middle(size_t cell)
{
    const double last = AGREEMENT_CHANCES - 1;
    return 1.0 / (1.0 + exp(-((double)cell - last / 2.0) * CELL_WIDTH));
}

static const double MIDDLES[AGREEMENT_PROMISES] = {0.0, 0.2,  0.45, 0.8, 1.25,
                                                   2.0, 3.25, 5.0,  7.0, 10.0};

double agreement_row_middle(size_t row)
{
    return MIDDLES[row];
}

/* Where a promise lies between the rows: `below` and the next one, with weights 1 - share, share.
 */
struct row_place {
    size_t below;
    double share;
};

static struct row_place row_place_of(double promise)
{
    size_t below = 0;
    while (below < AGREEMENT_PROMISES - 2 && promise >= MIDDLES[below + 1]) {
        below++;
    }
    double share = (promise - MIDDLES[below]) / (MIDDLES[below + 1] - MIDDLES[below]);
    return (struct row_place){.below = below, .share = fmin(fmax(share, 0.0), 1.0)};
}

void agreement_init(struct agreement *agreement)
{
    memset(agreement, 0, sizeof *agreement);
    agreement->gain = 1.0;
    agreement_fit(agreement);
}

void agreement_age(struct agreement *agreement, double half_life_items)
{
    agreement->gain *= exp2(1.0 / half_life_items);
    if (agreement->gain < LARGEST_GAIN) {
        return;
    }
    for (size_t r = 0; r < AGREEMENT_PROMISES; r++) {
        for (size_t c = 0; c < AGREEMENT_CHANCES; c++) {
            agreement->rows[r].cells[c].not_given /= agreement->gain;
            agreement->rows[r].cells[c].hidden /= agreement->gain;
        }
    }
    agreement->gain = 1.0;
}

static struct agreement_cell *cell_of(struct agreement *agreement, double promise, double chance)
{
    struct row_place row = row_place_of(promise);
    size_t nearest = row.share < 0.5 ? row.below : row.below + 1;
    return &agreement->rows[nearest].cells[(size_t)lround(place_of(chance))];
}

void agreement_add_not_given(struct agreement *agreement, double promise, double chance)
{
    cell_of(agreement, promise, chance)->not_given += agreement->gain;
}

void agreement_add_given(struct agreement *agreement, double promise, double chance, double p)
{
    cell_of(agreement, promise, chance)->hidden += agreement->gain * (1.0 - p) / p;
}

void agreement_fit(struct agreement *agreement)
{
    for (size_t r = 0; r < AGREEMENT_PROMISES; r++) {
        struct agreement_row *row = &agreement->rows[r];
        double weights[AGREEMENT_CHANCES];
        struct isotonic_pool pools[AGREEMENT_CHANCES];
        for (size_t c = 0; c < AGREEMENT_CHANCES; c++) {
            weights[c] = row->cells[c].not_given / agreement->gain + LEAN_PAIRS;
            double hidden = row->cells[c].hidden / agreement->gain;
            row->chance[c] = (hidden + LEAN_PAIRS * agreement_cell_middle(c)) / weights[c];
        }
        isotonic_fit(row->chance, weights, pools, AGREEMENT_CHANCES);
        for (size_t c = 0; c < AGREEMENT_CHANCES; c++) {
            row->chance[c] = fmin(row->chance[c], SUREST);
        }
    }
}

static double chance_in_row(const struct agreement_row *row, double chance)
{
    double place = place_of(chance);
    size_t below = (size_t)place;
    if (below == 0 && chance < agreement_cell_middle(0)) {
        return row->chance[0] * chance / agreement_cell_middle(0);
    }
    if (below >= AGREEMENT_CHANCES - 1) {
        return row->chance[AGREEMENT_CHANCES - 1];
    }
    double share = place - (double)below;
    return (1.0 - share) * row->chance[below] + share * row->chance[below + 1];
}

double agreement_chance(const struct agreement *agreement, double promise, double chance)
{
    struct row_place row = row_place_of(promise);
    return (1.0 - row.share) * chance_in_row(&agreement->rows[row.below], chance) +
           row.share * chance_in_row(&agreement->rows[row.below + 1], chance);
}
