/*
 * snapshot_file: a file of lines of JSON, or one document, in the folder of a snapshot.
 */
#ifndef UNDERTAG_SNAPSHOT_FILE_H
#define UNDERTAG_SNAPSHOT_FILE_H

#include <jansson.h>
#include <stdio.h>

#include "daemon/pace.h"

struct snapshot_file {
    FILE *stream;
    const char *name;
    struct pace *pace;
    struct store_error *error;
};

/* The error that an errno is at a file: STORE_FULL where there is no room, otherwise
 * STORE_DENIED. */
int snapshot_fail(struct store_error *error, const char *name, int errnum);

/* Makes the file, which must not be there, in the folder that is open as `folder_fd`. The other
 * three are borrowed until it is closed. */
int snapshot_file_create(int folder_fd, const char *name, struct pace *pace,
                         struct store_error *error, struct snapshot_file *ret_file)
    __attribute__((warn_unused_result));

/* Writes a text of JSON and takes it; NULL: there was no memory for it. */
int snapshot_file_add(struct snapshot_file *file, json_t *line) __attribute__((warn_unused_result));

/* Brings what was written to the disk, if `code`, which is what has become of it so far, is
 * STORE_OK, and closes the file. Returns the code, or what went wrong here. */
int snapshot_file_close(struct snapshot_file *file, int code) __attribute__((warn_unused_result));

/* A file of one document, which is taken. */
int snapshot_file_write(int folder_fd, const char *name, json_t *document, struct pace *pace,
                        struct store_error *error) __attribute__((warn_unused_result));

#endif
