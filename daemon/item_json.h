/*
 * item_json: an item as it is told of. NULL where there is no memory, or, with `error`, where the
 * store cannot be read.
 */
#ifndef UNDERTAG_ITEM_JSON_H
#define UNDERTAG_ITEM_JSON_H

#include <jansson.h>

#include "storage/items.h"

/* The result of item.show. */
json_t *item_json(struct store_view *view, const struct item_record *record,
                  struct store_error *error);

/* The names of tags, in the order of their bytes. */
json_t *item_names_json(struct store_view *view, struct numbers tags, struct store_error *error);

json_t *item_text_json(struct store_text text);
json_t *item_fields_json(struct store_text fields);

#endif
