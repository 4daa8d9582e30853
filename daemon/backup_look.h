/*
 * backup_look: whether what is in a folder can be a home: both environments open, are of formats
 * that this version reads, and the model is one of that store. Nothing is changed there, and no
 * lock file made.
 *
 * It trusts the files' pages, which are those of an environment that was looked through before it
 * was copied. What stands in them has checksums of its own: `undertagd --verify` is for these.
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
