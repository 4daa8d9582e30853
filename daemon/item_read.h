/*
 * item_read: finding one filed item for a request.
 */
#ifndef UNDERTAG_ITEM_READ_H
#define UNDERTAG_ITEM_READ_H

#include "daemon/read_job.h"

/* Reads the item of an id, as it is now, into the workspace's record; otherwise the job holds a
 * fault, whose code is returned. */
int read_item(struct read_job *job, struct store_view *view, struct store_text id,
              struct workspace *workspace) __attribute__((warn_unused_result));

#endif
