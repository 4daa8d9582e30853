/*
 * backlog: how far the changes have come: committed (durable), learned (in the model), kept (in
 * the stored model). The writer, the trainer and whoever asks wait here for each other.
 *
 * The promise it keeps: what was committed `visible_within` ago is learned. The writer waits before
 * it commits more than the trainer can learn in a part of that time; and a reader that comes while
 * the trainer is late all the same waits for it. What was there before a start is not promised:
 * it is a backlog that `learned` tells of; what comes while it is learned joins it, at half the
 * speed of learning, so that it ends.
 *
 * All functions may be called from any thread. Times are milliseconds of one steady clock.
 */
#ifndef UNDERTAG_BACKLOG_H
#define UNDERTAG_BACKLOG_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "daemon/heartbeat.h"

struct backlog;

struct backlog_start {
    uint64_t committed; /* as found in the store */
    uint64_t learned;   /* as found in the stored model */
    uint64_t visible_within_ms;
};

int backlog_new(const struct backlog_start *start, struct backlog **ret_backlog)
    __attribute__((warn_unused_result));
void backlog_free(struct backlog *backlog);

/* What it takes to learn a change, in no unit: more for more text and more tags. */
uint64_t backlog_cost(size_t text_bytes, size_t tags);

/* --- writer --- */

/*
 * Waits until the trainer is near enough for more to be committed (or stops, or has failed), by so
 * much that it is worth a commit; returns how much cost may be committed now, 1 at least.
 */
uint64_t backlog_wait_for_room(struct backlog *backlog);

/* Changes up to `seq` are durable; the new ones cost this much. */
void backlog_committed(struct backlog *backlog, uint64_t seq, uint64_t cost, uint64_t now_ms);

/* --- trainer --- */

/*
 * Waits until there is something to learn behind `learned`, the time is over, it is nudged, or it
 * is to stop. Returns the last committed seq.
 */
uint64_t backlog_wait_for_work(struct backlog *backlog, uint64_t learned, uint64_t timeout_ms);

/* Waits for the time, or until it is to stop. */
void backlog_pause(struct backlog *backlog, uint64_t time_ms);

/* The model has learned up to `seq`; what is new of it cost this much and took this long. */
void backlog_learned(struct backlog *backlog, uint64_t seq, uint64_t cost, uint64_t took_us);

/* The stored model has learned up to `seq`. */
void backlog_kept(struct backlog *backlog, uint64_t seq);

/*
 * Others than the stored model need what was superseded behind some seq, too: a model that is
 * learned beside the one in use, and a backup, whose model is older than its store. `kept` stays at
 * `seq` at most, until its holder lets go (UINT64_MAX). backlog_hold_committed holds what is
 * superseded from now on, and returns the last committed seq; backlog_hold_kept what may not be
 * erased yet.
 */
enum backlog_holder {
    BACKLOG_REBUILD,
    BACKLOG_BACKUP,
    BACKLOG_HOLDERS
};

void backlog_hold(struct backlog *backlog, enum backlog_holder holder, uint64_t seq);
uint64_t backlog_hold_committed(struct backlog *backlog, enum backlog_holder holder);
void backlog_hold_kept(struct backlog *backlog, enum backlog_holder holder);
bool backlog_is_held(struct backlog *backlog, enum backlog_holder holder);

/* Has backlog_wait_for_work return once, whether there is something to learn or not. */
void backlog_nudge(struct backlog *backlog);

/* There will be no more learning: nobody waits for it from now on. */
void backlog_trainer_failed(struct backlog *backlog);

/* Learning waits for something that may take long, or goes on again: nobody waits for it meanwhile.
 */
void backlog_trainer_waits(struct backlog *backlog, bool waits);

/* --- whoever asks --- */

/* Waits until what was committed visible_within_ms before now is learned. */
void backlog_wait_for_promise(struct backlog *backlog, uint64_t now_ms);

struct backlog_numbers {
    uint64_t committed;
    uint64_t learned;
    uint64_t kept; /* in every model that is learned from the store */
};

struct backlog_numbers backlog_read(struct backlog *backlog);

/* Of the writer, the trainer and the storer. What the first two do here moves it; the writer also
 * waits elsewhere. */
struct heartbeat *backlog_heartbeat(struct backlog *backlog);

/* Everybody who waits returns, now and from now on. */
void backlog_stop(struct backlog *backlog);
bool backlog_is_stopping(struct backlog *backlog);

#endif
