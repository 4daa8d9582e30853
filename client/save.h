/*
 * save: a file that is there whole or not at all: written beside its place and renamed into it.
 */
#ifndef UNDERTAG_CLIENT_SAVE_H
#define UNDERTAG_CLIENT_SAVE_H

#include <stddef.h>

#include "client/failure.h"

/* Looks whether a file can be saved there, before the work is done: the folder is there and may be
 * written to, and what has that name now is a file. */
int save_check(const char *path, struct failure *failure) __attribute__((warn_unused_result));

/*
 * Saves the bytes under `path`, in place of a file of that name (of the file itself, where the name
 * is a symbolic link). After a failure nothing has changed and nothing is left behind.
 */
int save_file(const char *path, const char *bytes, size_t length, struct failure *failure)
    __attribute__((warn_unused_result));

#endif
