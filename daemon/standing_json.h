/*
 * standing_json: how good the proposals have been, as it is told.
 */
#ifndef UNDERTAG_STANDING_JSON_H
#define UNDERTAG_STANDING_JSON_H

#include <jansson.h>

#include "daemon/learner/standing.h"

enum {
    STANDING_WINDOW = 10000 /* items, where nobody says how many */
};

/* What a standing says of its last items: numbers alone, read in a moment. */
struct standing_told {
    struct standing_answer answer;
    struct standing_point history[STANDING_SEGMENTS];
    size_t history_count;
    struct reliability_row reliability[RELIABILITY_CLASSES];
};

/* `window` 0: of all items. */
void standing_tell(const struct standing *standing, uint64_t window,
                   struct standing_told *ret_told);

/* The result of desk.standing; NULL: no memory. */
json_t *standing_json(const struct standing_told *told, uint64_t learned);

#endif
