/*
 * trial: one home whose daemon is killed again and again, the ledger of what it must hold, and a
 * second home with a daemon that nothing happens to and that gets the same changes.
 */
#ifndef UNDERTAG_TESTS_TRIAL_H
#define UNDERTAG_TESTS_TRIAL_H

#include "tests/faults/feeder.h"
#include "tests/faults/ledger.h"
#include "tests/faults/moments.h"
#include "tests/integration/undertagd.h"

/* A rebuild with settings that none just before it had. */
struct trial_rebuild {
    unsigned number; /* 0: there was none */
    unsigned moment; /* the last change that it began with */
};

struct trial_counts {
    unsigned kills;
    unsigned in_flush;
    unsigned in_build;
    unsigned in_storing_build;
    unsigned in_commit;
    unsigned in_overwriting;
    unsigned in_snapshot;
    unsigned elsewhere;
    unsigned opening;   /* kills with a change under way that opens a tag */
    unsigned found_in;  /* changes in doubt that were in, */
    unsigned lost;      /* and that were not */
    unsigned read_back; /* times that all of it was */
    unsigned verified;
    unsigned weights_compared;
    unsigned snapshots; /* that were whole, each time that one was looked at */
};

struct trial {
    struct ledger ledger;
    struct undertagd daemon;
    pid_t storer;
    struct feeder feeder;         /* while the daemon runs */
    struct trial_rebuild rebuild; /* the last one that was acknowledged */
    struct undertagd undisturbed;
    unsigned repeated; /* the changes that the other one has */
    unsigned rebuilt;  /* the number of its last rebuild */
    struct trial_counts counts;
};

void trial_init(struct trial *trial, uint64_t seed);

/* Starts the daemon for a round. */
void trial_start(struct trial *trial, unsigned round);

/* What the daemon came back with must be what the ledger says, and so the rebuild. */
void trial_settle(struct trial *trial);

/* Asks for a rebuild, unless one is under way. All that was sent is acknowledged then. */
void trial_rebuild(struct trial *trial);

/* Has a snapshot begun; nobody waits for it. */
void trial_snapshot(const struct trial *trial);

/* Whether a change is under way that opens a tag. */
bool trial_is_opening(const struct trial *trial);

/* kill -9. What had been acknowledged goes into the ledger; returns what the kill fell into. */
struct moment trial_kill(struct trial *trial);

/* `undertagd --verify` finds the home whole: stored counts are those that its items give. No daemon
 * is at work there. */
void trial_verify(struct trial *trial);

/* Lets the daemon that was started and settled finish, stops it, and holds its weights against
 * those of the other one. */
void trial_compare_weights(struct trial *trial);

/* Removes both homes; -1 where a daemon has not ended well. */
int trial_remove(struct trial *trial);

#endif
