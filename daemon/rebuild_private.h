/*
 * rebuild_private: what the two files that are a rebuild share: rebuild (the trainer's side and any
 * thread's) and rebuild_builder (the thread that learns).
 */
#ifndef UNDERTAG_REBUILD_PRIVATE_H
#define UNDERTAG_REBUILD_PRIVATE_H

#include "daemon/build.h"
#include "daemon/rebuild.h"
#include "daemon/sync.h"

enum rebuild_phase {
    REBUILD_IDLE,
    REBUILD_STARTING, /* the thread of whoever asked for it */
    REBUILD_BUILDING, /* the builder's thread is at work */
    REBUILD_READY,    /* it waits for the trainer */
    REBUILD_TAKING,   /* the trainer is at work with the build */
    REBUILD_TAKEN,    /* the builder's thread again: the old model is removed */
    REBUILD_FAILED
};

struct rebuild {
    struct rebuild_settings settings;
    pthread_mutex_t mutex;
    pthread_cond_t moved;     /* `phase` or `stopping` has changed */
    enum rebuild_phase phase; /* from here on: under the mutex */
    bool stopping;
    bool is_barred;
    bool is_begun; /* the thread is to be joined */
    struct options used;
    struct options next;
    struct learning_notes notes;
    uint64_t seq;     /* at which the build began; unlike the notes' it stays to the very end */
    uint64_t learned; /* by the build */
    uint64_t bytes;   /* that the build takes */
    bool has_ended;
    uint64_t ended_seq;
    char failure[TROUBLE_BYTES];

    pthread_t thread;
    struct build build; /* the builder's, but the trainer's while it is REBUILD_TAKING */
    struct store_error error;
};

enum rebuild_phase rebuild_phase_now(struct rebuild *rebuild);
void rebuild_set_phase(struct rebuild *rebuild, enum rebuild_phase phase);

/* How far the build has come is for all to read. */
void rebuild_publish(struct rebuild *rebuild);

/* Notes in the store that nothing more is wanted, and that what was is in force, if it is. */
void rebuild_note(struct rebuild *rebuild, bool is_used);

/* The builder's thread: from REBUILD_BUILDING to REBUILD_IDLE. */
void *rebuild_run(void *argument); /* a struct rebuild */

#endif
