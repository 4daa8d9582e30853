/*
 * backup_file: a file of a backup while its bytes come: written, summed up, and sent on to the disk
 * little by little, so that a commit of the daemon's never waits behind all of it. The disk keeps
 * its reserve.
 */
#ifndef UNDERTAG_BACKUP_FILE_H
#define UNDERTAG_BACKUP_FILE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "daemon/sha256_file.h"

struct backup_file {
    int fd; /* for writing; the caller's */
    uint64_t reserve_bytes;
    void *user;
    bool (*wrote)(void *user, size_t bytes); /* so many more; false: stop here. May wait */

    struct sha256_ctx sum; /* from here on: private until backup_file_end */
    uint64_t unsynced;
    uint64_t bytes; /* written */
    int code;       /* 0, or why it stopped: a negative errno, -ECANCELED where `wrote` has */
};

void backup_file_begin(struct backup_file *file, int fd, uint64_t reserve_bytes,
                       bool (*wrote)(void *user, size_t bytes), void *user);

/* A kv_take: `user` is the file. */
int backup_file_take(void *user, const void *data, size_t size);

/* Syncs it, and gives its sum. Returns `code`. */
int backup_file_end(struct backup_file *file, char text[SHA256_TEXT_BYTES])
    __attribute__((warn_unused_result));

/* 0 where the file system of the descriptor has more room than `bytes` and the reserve, -ENOSPC
 * where it does not, or another negative errno. */
int backup_file_ask_room(int fd, uint64_t bytes, uint64_t reserve_bytes)
    __attribute__((warn_unused_result));

#endif
