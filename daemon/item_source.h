/*
 * item_source: a stored item as the source of its features.
 */
#ifndef UNDERTAG_ITEM_SOURCE_H
#define UNDERTAG_ITEM_SOURCE_H

#include <jansson.h>

#include "daemon/fields.h"
#include "daemon/text/features.h"
#include "storage/items.h"

enum {
    ITEM_LANGUAGE_BYTES = 64
};

/* Zero-initialised is empty; private but for `source`. */
struct item_source {
    struct features_source source; /* points into the record and into the rest */
    struct field_list fields;
    json_t *parsed_fields;
    char language[ITEM_LANGUAGE_BYTES];
};

void item_source_deinit(struct item_source *source);

/* Fills `source` from a record, which is borrowed while it is read. Returns 0, -ENOMEM, or -EINVAL
 * where the record's fields are no fields. */
int item_source_fill(struct item_source *source, const struct item_record *record)
    __attribute__((warn_unused_result));

/* Which member of params has most of the words, as a JSON Pointer: the one to blame where there are
 * too many. */
const char *item_source_longest(const struct features_source *source);

#endif
