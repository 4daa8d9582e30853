/*
 * snapshot_tags: tags.jsonl, the rows of the matrix: a line a tag, in the order in which they were
 * opened.
 */
#ifndef UNDERTAG_SNAPSHOT_TAGS_H
#define UNDERTAG_SNAPSHOT_TAGS_H

#include "daemon/learner/model.h"
#include "daemon/snapshot/snapshot_file.h"
#include "storage/store.h"

/* `view` and `model` are of one moment. STORE_CORRUPT where they do not have the same tags. */
int snapshot_tags_write(struct export_part *part, struct store_view *view,
                        const struct model *model, struct pace *pace, struct store_error *error)
    __attribute__((warn_unused_result));

#endif
