/*
 * methods: what the daemon can be asked, as the server's method table.
 */
#ifndef UNDERTAG_METHODS_H
#define UNDERTAG_METHODS_H

#include <uv.h>

#include "daemon/call.h"
#include "daemon/engine.h"
#include "daemon/options.h"
#include "daemon/server.h"
#include "daemon/snapshot/snapshots.h"

struct methods;

/* Opens its handles in the loop. The options are borrowed: what a reload changes holds from the
 * next request on. Returns 0 or a negative libuv code. */
int methods_new(uv_loop_t *loop, const struct options *options, struct methods **ret_methods)
    __attribute__((warn_unused_result));

/* What engine_settings.changes_done is to call, with the methods as its user; any thread. */
void methods_wake(void *user);

/* Serve from these; borrowed. Before the first request; both NULL after the last. */
void methods_use(struct methods *methods, struct engine *engine, struct snapshots *snapshots);

/* For the number of connections and the group of the socket; NULL: no server (any more). */
void methods_watch(struct methods *methods, const struct server *server);

const struct method_table *methods_table(const struct methods *methods);

/* Closes the handles; `done` is called once they are closed, which frees the methods. No call may
 * be running. */
void methods_close(struct methods *methods, void (*done)(void *user), void *user);

#endif
