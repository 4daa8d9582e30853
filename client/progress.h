/*
 * progress: one line that renews itself: how much is done, how fast, and how long it will take.
 *
 *     ████████▌             43 %   12,345 items   2,310 a second   8 s left
 *
 * On a stream that is no terminal, or a dumb one, nothing is ever written. Time is an argument.
 */
#ifndef UNDERTAG_CLIENT_PROGRESS_H
#define UNDERTAG_CLIENT_PROGRESS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "client/screen.h"

enum {
    PROGRESS_RENEW_MS = 100, /* the line is written at most this often */
    PROGRESS_BYTES = 512
};

/* What is known; `total` 0: the size is not known, so no share and no time left are shown. */
struct progress_view {
    uint64_t count;   /* items */
    const char *noun; /* one of what is counted; NULL: "item" */
    bool is_size;     /* bytes are counted */
    uint64_t done;    /* of `total`, in whatever unit the size is known in */
    uint64_t total;
    double rate;         /* items a second, below 0: not known yet */
    double seconds_left; /* below 0: not known yet */
};

/* All members but the first two are private. */
struct progress {
    const char *noun; /* see progress_view; set these two behind progress_init */
    bool is_size;
    struct screen *screen; /* borrowed; measured anew before each writing */
    uint64_t total;
    int64_t started_ms;
    int64_t written_ms; /* -1: never */
    int64_t sample_ms;  /* where the rate was last taken */
    uint64_t sample_count;
    double rate;
    bool shown; /* the line stands on the terminal */
};

void progress_init(struct progress *progress, struct screen *screen, uint64_t total,
                   int64_t now_ms);

/* The whole is another than it was. */
void progress_expect(struct progress *progress, uint64_t total);

/* Renews the line if it is due. */
void progress_update(struct progress *progress, uint64_t count, uint64_t done, int64_t now_ms);

/* Takes the line away, before something else is written or at the end. */
void progress_clear(struct progress *progress);

/* The line in at most `columns` columns: the parts that do not fit are left out, the last first. */
void progress_format(const struct progress_view *view, size_t columns, bool unicode,
                     char line[PROGRESS_BYTES]);

#endif
