/*
 * snapshot_said: an item as the calls that would make it anew: its filing, and behind that what was
 * ruled, checked and tagged again.
 *
 * A record does not say in which order all this came, but enough to find an order from which the
 * same follows: what is on the item, what is known of which tag, and what its checks have found.
 */
#ifndef UNDERTAG_SNAPSHOT_SAID_H
#define UNDERTAG_SNAPSHOT_SAID_H

#include <jansson.h>

#include "storage/items.h"

/* The params of item.file, with a member `then` where more was said: a list of {"method", "params"}
 * in order, the params without the id. NULL: no memory, or with `error` the store cannot be read.
 */
json_t *snapshot_said(struct store_view *view, const struct item_record *record,
                      struct store_error *error);

#endif
