/*
 * snapshot_items: items.jsonl, a line an item in the order of their latest changes, and
 * proposals.jsonl, a line an item that may lack something.
 */
#ifndef UNDERTAG_SNAPSHOT_ITEMS_H
#define UNDERTAG_SNAPSHOT_ITEMS_H

#include "daemon/learner/model.h"
#include "daemon/snapshot/snapshot_file.h"
#include "storage/store.h"

/* The items as filed, with what was said of them, in the form that `undertag file` takes. */
int snapshot_items_write(struct export_part *part, struct store_view *view, struct pace *pace,
                         struct store_error *error) __attribute__((warn_unused_result));

/* The gaps of each item whose chance is at least `floor`, the likeliest first. `view`, `model` and
 * `base` are of one moment. */
int snapshot_proposals_write(struct export_part *part, struct store_view *view,
                             const struct model *model, const struct base *base, double floor,
                             struct pace *pace, struct store_error *error)
    __attribute__((warn_unused_result));

#endif
