/*
 * backup_desk: the fixture of the tests of backups: a daemon, its operator's connection, and
 * another daemon that may be made of a backup. Nothing is rehearsed, so that what is learned can be
 * compared bit by bit.
 */
#ifndef UNDERTAG_TESTS_BACKUP_DESK_H
#define UNDERTAG_TESTS_BACKUP_DESK_H

#include "tests/integration/program.h"
#include "tests/integration/service.h"

enum {
    DESK_CHANGES = 1200, /* before a backup that is to take seconds */
    DESK_PATH_BYTES = 256,
    PARAMS = -32602,
    INTERNAL = -32603,
    STORE = -32005,
    STOPPING = -32006
};

struct desk {
    struct service *service;
    struct peer operator;
    struct undertagd restored;
    struct peer reader; /* of the restored one */
    bool is_reading;
};

/* The last run of undertagd --restore. */
extern struct program_run desk_run;

int desk_set_up(void **state);
int desk_tear_down(void **state);

/* A path in the folder of exports, until the next one; whether it is there. */
const char *desk_path(const struct desk *desk, const char *name);
bool desk_has(const struct desk *desk, const char *name);

/* Change k, which gets seq k, of a stream that is always the same; and the first so many. */
void desk_change(struct peer *peer, unsigned k);
void desk_feed(struct peer *peer, unsigned count);

/* Makes a home of a backup, which ends in this exit code. */
void desk_restore(const struct desk *desk, const char *backup, int expected);
void desk_start_restored(struct desk *desk);

/* Asks the daemon for a slow one, and waits until some of it is written; returns the request's id.
 */
unsigned desk_begin_slowly(struct desk *desk, const char *name);

#endif
