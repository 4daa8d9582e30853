/*
 * snapshot_file: a file of lines of JSON, or one document, in a snapshot that is being written. It
 * is the snapshot's end that brings it to the disk.
 */
#ifndef UNDERTAG_SNAPSHOT_FILE_H
#define UNDERTAG_SNAPSHOT_FILE_H

#include <jansson.h>
#include <stdbool.h>
#include <stdio.h>

#include "daemon/export_folder.h"
#include "daemon/pace.h"

struct snapshot_file {
    FILE *stream;
    const char *name;
    struct pace *pace;
    struct store_error *error;
    bool is_exact; /* numbers are not ours: all of their digits count */
};

/* The error that an errno is at a file: STORE_FULL where there is no room, otherwise
 * STORE_DENIED. */
int snapshot_fail(struct store_error *error, const char *name, int errnum);

/* The same of what export_folder.h gave; STORE_REFUSED for what is wrong with a name. */
int snapshot_fail_export(struct store_error *error, int code, const char *sentence);

/* Makes a file in the part, for reading, too; the descriptor is the caller's. */
int snapshot_file_open(struct export_part *part, const char *name, int *ret_fd,
                       struct store_error *error) __attribute__((warn_unused_result));

/* The same as a file of lines. `pace` and `error` are borrowed until it is closed, as the name is.
 */
int snapshot_file_create(struct export_part *part, const char *name, struct pace *pace,
                         struct store_error *error, struct snapshot_file *ret_file)
    __attribute__((warn_unused_result));

/* Writes a text of JSON and takes it; NULL: there was no memory for it. */
int snapshot_file_add(struct snapshot_file *file, json_t *line) __attribute__((warn_unused_result));

/* Closes the file. Returns `code`, which is what has become of it so far, or what went wrong here.
 */
int snapshot_file_close(struct snapshot_file *file, int code) __attribute__((warn_unused_result));

/* A file of one document, which is taken. */
int snapshot_file_write(struct export_part *part, const char *name, json_t *document,
                        struct pace *pace, struct store_error *error)
    __attribute__((warn_unused_result));

#endif
