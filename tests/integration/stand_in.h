/*
 * stand_in: a socket in the daemon's place. It passes requests on to a real daemon and keeps what
 * that answers; later it gives the same answers by itself, all but one as a test wants it to.
 *
 * One thread serves all connections. Answers are given by the order of the requests, whichever
 * connection they come on, each with the id that was asked for; where more is asked than was kept,
 * the last answer is given again.
 */
#ifndef UNDERTAG_TESTS_STAND_IN_H
#define UNDERTAG_TESTS_STAND_IN_H

#include <jansson.h>
#include <pthread.h>
#include <stdbool.h>
#include <stddef.h>

enum {
    STAND_IN_ANSWERS = 32
};

/* What a daemon answered to one run of a client. */
struct rehearsal {
    json_t *answers[STAND_IN_ANSWERS]; /* whole ones, owned */
    size_t count;
};

void rehearsal_deinit(struct rehearsal *rehearsal);

struct stand_in {
    const char *path; /* of its socket, borrowed */
    int listener;
    pthread_t thread;
    pthread_mutex_t mutex; /* for all that follows */
    const char *daemon;    /* the socket to pass on to; NULL: it answers by itself */
    struct rehearsal *rehearsal;
    size_t asked;   /* requests since the last stand_in_pass_on or stand_in_repeat */
    size_t spoiled; /* the answer that is another one */
    char *instead;  /* what is sent for it, # being the id; NULL: all are given as they were */
    bool closes;    /* the connection, behind it */
};

void stand_in_start(struct stand_in *stand_in, const char *path);
void stand_in_stop(struct stand_in *stand_in);

/* From now on requests go to the daemon at this socket, and the rehearsal keeps its answers. */
void stand_in_pass_on(struct stand_in *stand_in, const char *daemon, struct rehearsal *rehearsal);

/* The rehearsal is over, and the caller's alone. Nothing may be asked until the next one. */
void stand_in_rest(struct stand_in *stand_in);

/* From now on it answers as was rehearsed. */
void stand_in_repeat(struct stand_in *stand_in, struct rehearsal *rehearsal);

/* Likewise, but for one answer: `instead` is sent (copied, with its line end, # being the id). */
void stand_in_spoil(struct stand_in *stand_in, struct rehearsal *rehearsal, size_t at,
                    const char *instead, bool closes);

/* How many requests came since. */
size_t stand_in_asked(struct stand_in *stand_in);

#endif
