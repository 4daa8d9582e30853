/*
 * snapshot_said: an item as the calls that would make it anew: its filing, and behind that what was
 * ruled, checked and tagged again.
 *
 * A record does not say in which order all this came, but enough to find an order from which the
 * same follows: what is on the item, what is known of which tag, and what its checks have found.
 *
 * A tag must be open before anybody rules on it, declines it or finds it in a check. In the store
 * it was; where the items are filed anew, in the order of their latest changes, it may not be yet.
 * Then the item is filed without its words first, under just these tags, which opens them.
 */
#ifndef UNDERTAG_SNAPSHOT_SAID_H
#define UNDERTAG_SNAPSHOT_SAID_H

#include <jansson.h>

#include "storage/items.h"

/* Which tags are open once all that was said so far has been done. */
struct snapshot_opened {
    bool *is_open; /* by number */
    size_t tag_count;
    size_t first_closed; /* all below are open */
};

/* For the tags of a view: none is open. -1: no memory. */
int snapshot_opened_init(struct snapshot_opened *opened, struct store_view *view)
    __attribute__((warn_unused_result));
void snapshot_opened_deinit(struct snapshot_opened *opened);

/* The params of item.file, with a member `then` where more was said: a list of {"method", "params"}
 * in order, the params without the id. NULL: no memory, or with `error` the store cannot be read.
 */
json_t *snapshot_said(struct snapshot_opened *opened, struct store_view *view,
                      const struct item_record *record, struct store_error *error);

#endif
