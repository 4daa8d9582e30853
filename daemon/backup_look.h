/*
 * backup_look: whether what is in a folder can be a home: both environments open, their pages are
 * whole, and the model is one of that store. Nothing is changed there, and no lock file made.
 *
 * The pages are looked at since a copy may be of what was damaged already, and LMDB trusts them
 * without a look. The checksums of what stands in them are left to `undertagd --verify`, which
 * takes a process of its own for that, and many times as long.
 */
#ifndef UNDERTAG_BACKUP_LOOK_H
#define UNDERTAG_BACKUP_LOOK_H

#include <stddef.h>
#include <stdint.h>

#include "storage/store_error.h"

struct backup_found {
    uint64_t seq;
    uint64_t items;
    uint64_t learned;
};

int backup_look(const char *folder, size_t map_bytes, struct backup_found *ret_found,
                struct store_error *error) __attribute__((warn_unused_result));

#endif
