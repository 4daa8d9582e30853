/*
 * snapshots: the folder of a daemon's snapshots, as somebody else finds it, and one that is being
 * written for as long as a test needs it.
 */
#ifndef UNDERTAG_TESTS_SNAPSHOTS_H
#define UNDERTAG_TESTS_SNAPSHOTS_H

#include "tests/integration/service.h"

enum {
    SNAPSHOTS_PATH_BYTES = 256
};

/* The path of a file in the folder, which is in the home. */
const char *snapshots_path(const struct service *service, const char *name);

/* Whether there is such a file or folder. */
bool snapshots_have(const struct service *service, const char *name);

/* The names of all that is in a snapshot, or with "" of all there are: sorted, with a space between
 * two. Kept as peer.h says. */
const char *snapshots_names(struct service *service, const char *snapshot);

/* The names that snapshot.list has, in its order, likewise. */
const char *snapshots_listed(struct service *service);

/* What `latest` leads to; "" for nothing. */
const char *snapshots_latest(struct service *service);

/* A document of JSON in the folder; and the entries of a file of lines. Kept likewise. */
json_t *snapshots_read(struct service *service, const char *name);
json_t *snapshots_read_lines(struct service *service, const char *name);

/*
 * Files entries with so many words of their own that a snapshot takes 1 MiB a second for some
 * seconds, and waits until they are learned.
 */
void snapshots_fill(struct service *service);

/* Begins one of that rate, called `name`, on a connection of its own, and waits until it is under
 * way. Returns the request's id; its answer has not come yet. */
unsigned snapshots_begin_slow(const struct service *service, struct peer *writer, const char *name);

/* daemon.state's member. */
json_t *snapshots_state(struct peer *peer);

/* Asks until none is being written. */
void snapshots_wait(struct peer *peer);

#endif
