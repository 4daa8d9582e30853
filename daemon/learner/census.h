/*
 * census: how many tags have been given how often, in bins: exact up to 64, then eight to an
 * octave. What holds for every tag of a bin is summed over bins, not over the vocabulary.
 */
#ifndef UNDERTAG_CENSUS_H
#define UNDERTAG_CENSUS_H

#include <stddef.h>
#include <stdint.h>

enum {
    CENSUS_BINS = 272
};

/* The bin of a count. */
size_t census_bin(uint32_t count);

/* The count in the middle of a bin; that of an exact bin is the count itself. */
double census_middle(size_t bin);

#endif
