/*
 * snapshot_room: room for large arrays while a snapshot is written, in files without a name that
 * are mapped: the system may have the memory back at any time, so it is not counted as ours.
 */
#ifndef UNDERTAG_SNAPSHOT_ROOM_H
#define UNDERTAG_SNAPSHOT_ROOM_H

#include <stddef.h>

#include "daemon/export_folder.h"
#include "storage/store_error.h"

/* A file in the part that has no name any more: it is gone with its descriptor, the caller's. */
int snapshot_room_open(struct export_part *part, int *ret_fd, struct store_error *error)
    __attribute__((warn_unused_result));

/* Zero-initialised is empty. */
struct snapshot_room {
    void *data; /* zeros at first */
    size_t bytes;
};

/* Makes room on the disk of the part. STORE_FULL where there is none. */
int snapshot_room_make(struct export_part *part, size_t bytes, struct snapshot_room *ret_room,
                       struct store_error *error) __attribute__((warn_unused_result));
void snapshot_room_free(struct snapshot_room *room);

#endif
