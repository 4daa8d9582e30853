/*
 * agreement: P(missing | not given) of a tag in view of the item's other tags.
 *
 * A chance worked out pair by pair takes the pairs of an item for independent. They are not: where
 * much was proposed and little of it given, the item's words are mostly misleading, and its gaps
 * are worth less than they seem. So chances are calibrated once more, by how many of the item's
 * other likely tags they expect to be missing: what the item promises.
 *
 * The evidence needs no ruling. A true pair is given with p or hidden with 1 - p, whatever the
 * others are; so for each given pair of propensity p, (1 - p)/p pairs like it are hidden (Horvitz
 * & Thompson 1952), like it also in the other pairs, of which it is none. What a cell's chance
 * should be is Σ (1 - p)/p over its given pairs, over the number of its pairs not given; isotonic
 * regression over the cells of one promise makes it rise with the chance.
 *
 * Pure numbers. The owner says which thread may touch it.
 */
#ifndef UNDERTAG_AGREEMENT_H
#define UNDERTAG_AGREEMENT_H

#include <stdbool.h>
#include <stddef.h>

enum {
    AGREEMENT_PROMISES = 10,
    AGREEMENT_CHANCES = 24
};

/* Tags that belong with at least this chance take part in the promise. */
#define AGREEMENT_LEAST 0.3

/* Evidence, in units of `gain`. */
struct agreement_cell {
    double not_given;
    double hidden;
};

/* Plain numbers: may be stored row by row; a row is of similar promises. */
struct agreement_row {
    struct agreement_cell cells[AGREEMENT_CHANCES];
    double chance[AGREEMENT_CHANCES]; /* as last fitted; rising */
};

struct agreement {
    double gain; /* what one pair counts now; rises so that older evidence fades */
    struct agreement_row rows[AGREEMENT_PROMISES];
};

void agreement_init(struct agreement *agreement);

/* Ages the evidence by one item; half_life_items > 0. */
void agreement_age(struct agreement *agreement, double half_life_items);

/* Counts a pair of this chance that was not given, where the others promise so much, */
void agreement_add_not_given(struct agreement *agreement, double promise, double chance);

/* or one that was, of propensity p in (0, 1]. */
void agreement_add_given(struct agreement *agreement, double promise, double chance, double p);

/* Works the rows' chances out anew. */
void agreement_fit(struct agreement *agreement);

/* Where a row and a cell have their middles: a promise, row < AGREEMENT_PROMISES, and a chance,
 * cell < AGREEMENT_CHANCES. Cells' middles are equally far apart in the logit. */
double agreement_row_middle(size_t row);
double agreement_cell_middle(size_t cell);

/* The chance in view of what the others promise: between rows by straight lines in the promise,
 * between cells by straight lines in the logit of the chance, below the first cell in proportion to
 * the chance; as the outermost row or cell has it beyond that. */
double agreement_chance(const struct agreement *agreement, double promise, double chance);

#endif
