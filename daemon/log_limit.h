/*
 * log_limit: how many lines of one kind may be logged: a few in each span of time, and then how
 * many were held back. The clock is an argument.
 */
#ifndef UNDERTAG_LOG_LIMIT_H
#define UNDERTAG_LOG_LIMIT_H

#include <stdbool.h>
#include <stdint.h>

enum {
    LOG_LIMIT_LINES = 5,
    LOG_LIMIT_SPAN_MS = 10000
};

/* Zero-initialised has logged nothing. Private. */
struct log_limit {
    uint64_t since_ms; /* when the span began */
    unsigned logged;   /* in it */
    uint64_t held_back;
};

/* Whether a line may be logged now; one that may not is counted. */
bool log_limit_allows(struct log_limit *limit, uint64_t now_ms);

/* How many were held back in a span that is over; each is told once. 0: nothing to tell. To be
 * asked before log_limit_allows, and now and then. */
uint64_t log_limit_held_back(struct log_limit *limit, uint64_t now_ms);

#endif
