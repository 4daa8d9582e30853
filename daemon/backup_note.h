/*
 * backup_note: what a backup is, as backup.json in its folder says: which change it reaches, and
 * the sums of its files.
 *
 *     {"format": 1, "made": "2026-12-02T10:15:00Z", "version": "0.1.0", "seq": 3000, "learned":
 * 2990, "files": [{"name": "model/data.mdb", "bytes": 8192, "sha256": "…"},
 *                {"name": "store/data.mdb", "bytes": 8192, "sha256": "…"}], "sha256": "…"}
 *
 * The last member is the sum of the note itself: of all its other members as the shortest JSON, in
 * the order of their names.
 */
#ifndef UNDERTAG_BACKUP_NOTE_H
#define UNDERTAG_BACKUP_NOTE_H

#include <stdint.h>

#include "daemon/sha256_file.h"
#include "daemon/times.h"
#include "storage/store_error.h"

#define BACKUP_NOTE "backup.json"

enum {
    BACKUP_FORMAT = 1,
    BACKUP_FILES = 2, /* the model's, then the store's */
    BACKUP_NOTE_BYTES = 16384
};

/* Their paths in the folder. */
extern const char *const BACKUP_PATHS[BACKUP_FILES];

struct backup_note {
    char made[TIMES_BYTES];
    uint64_t seq;
    uint64_t learned;
    struct backup_note_file {
        uint64_t bytes;
        char sha256[SHA256_TEXT_BYTES];
    } files[BACKUP_FILES];
};

/* The note as text, on the heap; NULL: no memory. */
char *backup_note_write(const struct backup_note *note);

/* Reads such a text. STORE_NEWER where a later version wrote it, STORE_CORRUPT where it is no note,
 * or not as it was written. */
int backup_note_read(const char *text, size_t size, struct backup_note *ret_note,
                     struct store_error *error) __attribute__((warn_unused_result));

#endif
