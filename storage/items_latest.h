/*
 * items_latest: which of an item's changes was the latest as of an earlier moment.
 */
#ifndef UNDERTAG_ITEMS_LATEST_H
#define UNDERTAG_ITEMS_LATEST_H

#include <stdbool.h>

#include "storage/items.h"

/*
 * Says whether the change `seq` of the item `id` was the item's latest as of the change `moment`
 * (seq <= moment). Changes behind the moment are followed back by what they replaced, so none of
 * their records may have been erased; `buffer` is what those are read into.
 */
int items_was_latest(struct store_view *view, struct store_text id, uint64_t seq, uint64_t moment,
                     struct item_buffer *buffer, bool *ret_was, struct store_error *error)
    __attribute__((warn_unused_result));

#endif
