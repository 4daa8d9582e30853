/*
 * service: the fixture of most tests: a daemon that runs, and one peer that is connected.
 */
#ifndef UNDERTAG_TESTS_SERVICE_H
#define UNDERTAG_TESTS_SERVICE_H

#include "tests/integration/peer.h"
#include "tests/integration/undertagd.h"

struct service {
    struct undertagd daemon;
    struct peer peer;
};

/* A daemon with the options that `settings` sets; at most three, NULL for none. */
struct service *service_new(const char *first, const char *second, const char *third);

/* cmocka's set-up and tear-down. */
int service_set_up(void **state);
int service_tear_down(void **state);

/* The daemon is gone and comes back: the peer connects anew. */
void service_restart(struct service *service);

/* Ends the daemon as SIGTERM does, which must go well, and starts it again. */
void service_stop_and_start(struct service *service);

#endif
