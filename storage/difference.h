/*
 * difference: what makes one list of numbers (of 32 bits, as bytes) into another, in few bytes
 * where the two are alike. Pure.
 *
 * The size of the new list, in numbers (16 bits), then runs: how many numbers are as they were (8
 * bits), how many are not (8 bits), and these. What stands behind the last run is as it was.
 */
#ifndef UNDERTAG_DIFFERENCE_H
#define UNDERTAG_DIFFERENCE_H

#include <stdbool.h>
#include <stddef.h>

#include "storage/kv.h"

/* Writes what makes `before` into `after` to `into`; *ret_bytes says how much. False, with nothing
 * to be relied on in `into`, where it takes more than `most` bytes, or either is no list of
 * numbers.
 */
bool difference_make(struct kv_bytes before, struct kv_bytes after, unsigned char *into,
                     size_t most, size_t *ret_bytes);

/* Makes the list that `difference` tells of out of `before`. False where the two do not fit, or it
 * would take more than `most` bytes. */
bool difference_apply(struct kv_bytes before, struct kv_bytes difference, unsigned char *into,
                      size_t most, size_t *ret_bytes);

#endif
