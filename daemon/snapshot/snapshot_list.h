/*
 * snapshot_list: the snapshots in a folder of exports, and which of them go. May block.
 */
#ifndef UNDERTAG_SNAPSHOT_LIST_H
#define UNDERTAG_SNAPSHOT_LIST_H

#include <stddef.h>

#include "daemon/export_folder.h"
#include "daemon/snapshot/snapshot_manifest.h"

/* All that are whole, the oldest first; the caller frees the list. What is something else is passed
 * over. Returns 0 or a negative errno with a sentence in `error` (EXPORT_ERROR_BYTES). */
int snapshot_list(struct export_folder *folder, struct snapshot_found **ret_list, size_t *ret_count,
                  char *error) __attribute__((warn_unused_result));

/*
 * Removes the oldest of those that nobody gave a name, until there are `keep` of them. One whose
 * manifest somebody holds locked (flock, shared) is being read, and stays this time; the latest
 * always does, even where the clock was set back and others look newer. *ret_removed says how many
 * went.
 */
int snapshot_thin(struct export_folder *folder, size_t keep, size_t *ret_removed, char *error)
    __attribute__((warn_unused_result));

#endif
