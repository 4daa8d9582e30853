/*
 * feed: JSON Lines of items to the daemon, many on their way at once, each accounted for.
 *
 * Lines are sent as they stand, inside the envelope of a request, at most `window_lines` and
 * `window_bytes` unanswered at a time. What is not a JSON object is refused here, the rest by the
 * daemon; a refused line is told and the others go on. Answers come in the order of the lines, so
 * what is acknowledged is known to the line. A line may stand for several requests about its item
 * (filed_line.h): all are on their way at once, it is settled when the last is answered, and counts
 * by what its filing was, or as refused where any of them is.
 *
 * Where the store cannot take a line now (-32005), nothing new is sent until everything on its way
 * is answered; then, after a wait that doubles each time, that line and all after it are sent again
 * in order: an older version of an item never lands on top of a newer one. A line of several
 * requests is gone on with where it failed. A line that is sent again after it was
 * acknowledged is counted once. One thread.
 */
#ifndef UNDERTAG_CLIENT_FEED_H
#define UNDERTAG_CLIENT_FEED_H

#include <stddef.h>
#include <stdint.h>

#include "client/failure.h"
#include "client/wire.h"

struct feed_settings {
    size_t window_lines;     /* at least 1 */
    size_t window_bytes;     /* one line is always let through */
    size_t line_limit_bytes; /* a longer line is refused without being held */
    unsigned first_wait_ms;  /* before the first new try */
    unsigned tries;          /* how often a line is tried that the store cannot take; at least 1 */
    int turn_ms;             /* `moved` is called at least this often while waiting */
};

struct feed_counts {
    uint64_t fresh; /* "new" */
    uint64_t revised;
    uint64_t same;
    uint64_t refused;
    uint64_t unanswered; /* sent, and not known to have arrived */
    uint64_t bytes;      /* of input, up to the last line that is settled */
};

/* What the feed tells its user; none may be NULL. Called within feed_file and feed_finish. */
struct feed_hooks {
    void *user;
    void (*refused)(void *user, const char *source, uint64_t line, const char *reason);
    void (*acknowledged)(void *user, const struct wire_answer *answer); /* once a line */
    void (*moved)(void *user, const struct feed_counts *counts);
    void (*waiting)(void *user, const char *reason, unsigned wait_ms);
};

struct feed;

/* Both tables are copied, the wire is borrowed. */
int feed_new(struct wire *wire, const struct feed_settings *settings,
             const struct feed_hooks *hooks, struct feed **ret_feed, struct failure *failure)
    __attribute__((warn_unused_result));
void feed_free(struct feed *feed); /* NULL is passed over */

/*
 * Sends what `fd` holds up to its end. `source` names it in reports and must live as long as the
 * feed. Returns when the last line has been sent, answered or not.
 */
int feed_file(struct feed *feed, int fd, const char *source, struct failure *failure)
    __attribute__((warn_unused_result));

/* Waits until every line is answered. */
int feed_finish(struct feed *feed, struct failure *failure) __attribute__((warn_unused_result));

/* What is known so far, also after a failure. */
struct feed_counts feed_counts(const struct feed *feed);

/* Acknowledged lines among the counts. */
uint64_t feed_acknowledged(const struct feed_counts *counts);

#endif
