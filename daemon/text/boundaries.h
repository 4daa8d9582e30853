/*
 * boundaries: where the pieces of a text end, by the word boundary rules of Unicode Standard
 * Annex #29. Pure; any thread.
 */
#ifndef UNDERTAG_BOUNDARIES_H
#define UNDERTAG_BOUNDARIES_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/*
 * Sets is_boundary[i], for 0 < i < bytes, to whether a boundary stands between bytes i - 1 and i of
 * the text (valid UTF-8), else to 0; is_boundary[0] says nothing. `bytes` is the length of both
 * arrays.
 */
void boundaries_find(const char *text, size_t bytes, char *is_boundary);

/*
 * The same for a text of ASCII only, a piece at a time and far faster: the end of the piece that
 * starts at `start` < bytes, which must be 0 or the end of a piece. `bytes` if it is the last.
 */
size_t boundaries_ascii_end(const char *text, size_t bytes, size_t start);

/* --- what the rules know of a code point, for those who follow them elsewhere --- */

/* Its Word_Break property by its long name in Unicode's files, "ALetter"; "Other" for none. */
const char *boundaries_property(int32_t point);

/* Its property Extended_Pictographic, which rule WB3c asks for. */
bool boundaries_is_pictographic(int32_t point);

/* The version of the library that has the rules and these properties, as (major << 8) + minor. */
int boundaries_version(void);

#endif
