/*
 * report: a page for a metadata manager, put together from the daemon's answers. Pure.
 *
 * One self-contained HTML page: inline SVG, no script, nothing from elsewhere; light and dark, and
 * fit for print.
 */
#ifndef UNDERTAG_CLIENT_REPORT_H
#define UNDERTAG_CLIENT_REPORT_H

#include <jansson.h>
#include <stddef.h>
#include <time.h>

#include "client/tag_curve.h"

struct report {
    /* Answers of the known shapes (see reply.h), borrowed. */
    const json_t *state;
    const json_t *completeness;
    const json_t *standing;
    const json_t *worklist;
    struct tag_curve curve;
    time_t made_at;
};

/* The page, which the caller frees. -1: no memory. */
int report_write(const struct report *report, char **ret_page, size_t *ret_length)
    __attribute__((warn_unused_result));

#endif
