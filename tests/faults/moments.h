/*
 * moments: what a daemon is doing, or was doing when it was killed, seen from outside.
 *
 * LMDB takes its lock for writing for as long as a transaction is open that changes something. The
 * lock lies in the file lock.mdb of each environment, and is of the robust kind: when a process
 * dies, the kernel marks the locks that its threads held. So the file itself says afterwards
 * whether the kill fell inside a transaction, and the file of which environment says inside which:
 * no thread has to be caught in the act, and nothing depends on how fast this process is.
 *
 * Of the model's transactions those of the storer's thread are flushes; others overwrite what was
 * deleted.
 */
#ifndef UNDERTAG_TESTS_MOMENTS_H
#define UNDERTAG_TESTS_MOMENTS_H

#include <stdbool.h>
#include <sys/types.h>

/* The thread of a daemon that stores the model. Waits until there is one; fails the test where it
 * cannot be told from the others. */
pid_t moments_find_storer(pid_t daemon);

/* Of a daemon that runs: what is it doing? */
bool moments_is_flushing(const char *home, pid_t storer);
bool moments_is_committing(const char *home);
bool moments_is_building(const char *home);
bool moments_is_storing_build(const char *home);
bool moments_is_writing_snapshot(const char *home);

/* What a daemon was doing when it was killed. */
struct moment {
    bool in_flush;         /* storing of the model in use */
    bool in_build;         /* from its first file on, until what it leaves has been removed */
    bool in_storing_build; /* a part of the latter */
    bool in_commit;        /* of changes */
    bool in_overwriting;   /* of what was deleted from the model */
    bool in_snapshot;      /* from its first file on, until it has its name */
};

/* Of a home whose daemon was killed, before another one opens it. */
struct moment moments_of_kill(const char *home, pid_t storer);

/* Whether a transaction that was left open shows in this environment; for a test of this module. */
bool moments_was_left_open(const char *home, const char *environment);

#endif
