/*
 * completeness_how: where each figure of desk.completeness comes from, in plain words and with the
 * figures of the answer itself.
 */
#ifndef UNDERTAG_CLIENT_COMPLETENESS_HOW_H
#define UNDERTAG_CLIENT_COMPLETENESS_HOW_H

#include <jansson.h>

#include "client/screen.h"

/* Prints the explanation of an answer of the known shape. -1: no memory. */
int completeness_how(const struct screen *screen, const json_t *result)
    __attribute__((warn_unused_result));

#endif
