/*
 * cell: a weight and its accumulator in 32 bits, in memory and on disk alike.
 *
 * The weight is a fixed-point number: a whole number of CELL_STEP. The accumulator, which AdaGrad
 * raises by ever smaller parts of itself, is a floating-point number of 6 bits of exponent and 10
 * of fraction. Both are rounded up or down by chance, so that what is added arrives in the mean:
 * rounded to the nearest, additions below half a step would be lost for ever. Chance is a number
 * that the caller draws from what is learned (cell_noise), so that the same changes give the same
 * bits.
 *
 * A cell of 0 is no weight at all: an accumulator begins at .1.
 */
#ifndef UNDERTAG_CELL_H
#define UNDERTAG_CELL_H

#include <math.h>
#include <stdint.h>
#include <string.h>

/* A weight lies within 32767 steps of 0: ±16. */
#define CELL_STEP (1.0F / 2048.0F)

/* AdaGrad's accumulators start here, so that the first rate is finite. */
#define CELL_FIRST_ACCUMULATOR 0.1F

enum {
    CELL_MOST_WEIGHT = INT16_MAX,
    CELL_FRACTION_DROPPED = 13, /* bits of a float's fraction that a cell has no room for */
    CELL_LEAST_EXPONENT = 123   /* 2^-4, as a float codes it */
};

/* 64 bits that look like chance, of what is learned: SplitMix64's mixing (Steele et al. 2014). */
static inline uint64_t cell_noise(uint64_t number, uint32_t word, uint32_t tag)
{
    uint64_t mixed = number * 0x9E3779B97F4A7C15U + (((uint64_t)word << 32U) | tag);
    mixed = (mixed ^ (mixed >> 30U)) * 0xBF58476D1CE4E5B9U;
    mixed = (mixed ^ (mixed >> 27U)) * 0x94D049BB133111EBU;
    return mixed ^ (mixed >> 31U);
}

static inline uint32_t cell_of(int16_t weight, uint16_t accumulator)
{
    return (uint32_t)(uint16_t)weight | (uint32_t)accumulator << 16U;
}

/* In steps. */
static inline int16_t cell_weight(uint32_t cell)
{
    return (int16_t)(uint16_t)(cell & 0xFFFFU);
}

static inline uint16_t cell_accumulator_code(uint32_t cell)
{
    return (uint16_t)(cell >> 16U);
}

/* The accumulator, CELL_FIRST_ACCUMULATOR included; of a cell that is there. */
static inline float cell_accumulator(uint32_t cell)
{
    uint32_t bits =
        ((cell >> 16U) << CELL_FRACTION_DROPPED) + ((uint32_t)CELL_LEAST_EXPONENT << 23U);
    float value = 0.0F;
    memcpy(&value, &bits, sizeof value);
    return value;
}

/* The code of an accumulator, rounded by the low 13 bits of noise. */
static inline uint16_t cell_code_accumulator(float value, uint64_t noise)
{
    uint32_t bits = 0;
    memcpy(&bits, &value, sizeof bits);
    bits += (uint32_t)noise & ((1U << CELL_FRACTION_DROPPED) - 1U);
    bits -= (uint32_t)CELL_LEAST_EXPONENT << 23U;
    uint32_t code = bits >> CELL_FRACTION_DROPPED;
    return (uint16_t)(code < UINT16_MAX ? code : UINT16_MAX);
}

/* The code of a weight that moves by `change`, rounded by bits 32 to 55 of noise, and held within
 * what a cell can say. */
static inline int16_t cell_move_weight(int16_t weight, float change, uint64_t noise)
{
    float chance = (float)((noise >> 32U) & 0xFFFFFFU) * 0x1p-24F;
    /* Rounded before it is added: beside a large weight the chance would be rounded, too. */
    float moved = (float)weight + floorf(change / CELL_STEP + chance);
    moved = fminf(fmaxf(moved, -(float)CELL_MOST_WEIGHT), (float)CELL_MOST_WEIGHT);
    return (int16_t)moved;
}

#endif
