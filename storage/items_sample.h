/*
 * items_sample: items drawn at random for a check.
 */
#ifndef UNDERTAG_ITEMS_SAMPLE_H
#define UNDERTAG_ITEMS_SAMPLE_H

#include "storage/items.h"

enum {
    ITEMS_SAMPLE_MOST = 1000
};

/*
 * Draws up to `most` (ITEMS_SAMPLE_MOST at most) different items that nobody has checked yet, each
 * with the same chance; the same seed draws the same from the same store. Writes their seqs, in the
 * order in which they were drawn; fewer where there are no more.
 */
int items_sample(struct store_view *view, uint64_t seed, size_t most, struct item_buffer *buffer,
                 uint64_t *ret_seqs, size_t *ret_count, struct store_error *error)
    __attribute__((warn_unused_result));

#endif
