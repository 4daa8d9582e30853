/*
 * restore_source: a backup that a home is to be made of, and whether it is whole. Nothing is
 * changed there.
 */
#ifndef UNDERTAG_RESTORE_SOURCE_H
#define UNDERTAG_RESTORE_SOURCE_H

#include <stddef.h>
#include <stdint.h>

#include "daemon/backup_note.h"

enum {
    RESTORE_ERROR_BYTES = 1024
};

struct restore_source {
    const char *folder; /* its path; borrowed */
    struct backup_note note;
    uint64_t items;
    uint64_t bytes;        /* of all files */
    int fds[BACKUP_FILES]; /* the files, open for reading; -1: not open */
};

/*
 * Opens the folder's files, holds them against the sums in its note, and looks at them as at a
 * home. Returns 0, or the exit code for main with a sentence in `error`: 65 (EX_DATAERR) where it
 * is no backup, a damaged one, or that of a newer version.
 */
int restore_source_open(const char *folder, size_t map_bytes, struct restore_source *ret_source,
                        char *error) __attribute__((warn_unused_result));
void restore_source_close(struct restore_source *source);

/* A sentence into `error`; returns the exit code. */
int restore_fail(char *error, int exit_code, const char *format, ...)
    __attribute__((format(printf, 3, 4)));

#endif
