/*
 * heartbeat: whether the threads that must move do move. A thread beats when it has got something
 * done, and says when it begins to wait for work and when it has some; whoever watches looks now
 * and then. A thread that is at work and has not beaten since the last look stands still.
 *
 * Any thread beats; each watch belongs to one thread. No clock and no system calls.
 */
#ifndef UNDERTAG_HEARTBEAT_H
#define UNDERTAG_HEARTBEAT_H

#include <stdatomic.h>
#include <stdint.h>

enum heart {
    HEART_WRITER,
    HEART_TRAINER,
    HEART_STORER,
    HEART_COUNT
};

/* Zero-initialised: all wait. Private: an even count waits, an odd one is at work. */
struct heartbeat {
    _Atomic uint64_t counts[HEART_COUNT];
};

/* Of the thread itself. At work: it has work, or has got some of it done, each time a beat. */
void heartbeat_work(struct heartbeat *heartbeat, enum heart heart);

/* It begins to wait for work. */
void heartbeat_rest(struct heartbeat *heartbeat, enum heart heart);

/* Zero-initialised has not looked yet. Private. */
struct heartbeat_watch {
    uint64_t seen[HEART_COUNT];
};

/* Looks; returns the first heart that stands still since the last look, HEART_COUNT for none. */
enum heart heartbeat_look(const struct heartbeat *heartbeat, struct heartbeat_watch *watch);

/* What to call it in a sentence. */
const char *heartbeat_name(enum heart heart);

#endif
