/*
 * verify_home: says whether what a home holds is whole, without changing anything; a daemon may be
 * at work in it.
 */
#ifndef UNDERTAG_VERIFY_HOME_H
#define UNDERTAG_VERIFY_HOME_H

#include <stdio.h>

#include "daemon/options.h"

/*
 * Writes a line for each fault and one in the end for the store and the model each. Returns 0 where
 * all is whole, EX_DATAERR where something is damaged, EX_NOINPUT where there is no home, or
 * another exit code where it could not look, with a line that says why.
 */
int verify_home(const char *home, const struct options *options, FILE *out);

#endif
