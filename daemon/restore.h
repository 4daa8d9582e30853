/*
 * restore: makes a home of a backup.
 */
#ifndef UNDERTAG_RESTORE_H
#define UNDERTAG_RESTORE_H

#include <stdio.h>

#include "daemon/options.h"
#include "daemon/restore_source.h"

/*
 * Copies the backup in `folder` into the home, which must be not there, or empty but for the folder
 * of exports and a lock, and says in a line
 * on `out` what is there now. Returns 0, or the exit code for main with a sentence in `error`
 * (RESTORE_ERROR_BYTES). A backup that is not whole is refused before anything is changed; what a
 * kill has left is no home (restore_check), and restoring again begins anew.
 */
int restore_home(const char *home, const char *folder, const struct options *options, FILE *out,
                 char *error) __attribute__((warn_unused_result));

/* Whether a home is one that restore_home has begun and not ended: then the exit code for main,
 * with a sentence. */
int restore_check(const char *home, char *error) __attribute__((warn_unused_result));

#endif
