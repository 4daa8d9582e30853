/*
 * script: which characters are written without spaces between words and so are counted in pairs.
 * Pure; any thread.
 */
#ifndef UNDERTAG_SCRIPT_H
#define UNDERTAG_SCRIPT_H

#include <stdbool.h>
#include <stdint.h>

/*
 * Whether a code point is a letter or number of Han, Hiragana or Katakana (Scripts.txt of Unicode
 * 15), or one of the marks between them that Unicode gives to no single script: the prolonged sound
 * mark, the kana repeat marks and the closing mark U+3006.
 */
bool script_in_pairs(int32_t point);

/* Whether a code point is a letter or a number: general category L* or N*. */
bool script_in_word(int32_t point);

#endif
