/*
 * connection: one peer: its lines into calls, and the calls' answers, in the order of the calls,
 * back to it.
 *
 * Reading stops while too much waits: answers that the peer has not read, or calls that have not
 * ended. A peer that holds more than its even share while all connections together hold too much is
 * told and closed. Loop thread only.
 */
#ifndef UNDERTAG_CONNECTION_H
#define UNDERTAG_CONNECTION_H

#include <stddef.h>
#include <uv.h>

#include "daemon/call_queue.h"

struct connection;

/* What all connections of a server hold together, in lines that are not whole yet, in calls and in
 * answers that are not read yet; the server's, each connection adds its own. */
struct connection_room {
    struct call_crowd crowd;
    size_t limit_bytes;
    size_t held_bytes;
    size_t connections;
};

/* How long a peer may keep its connection without getting on, in milliseconds. */
struct connection_patience {
    uint64_t stalled_ms; /* in the middle of a line, or with answers that it does not read */
    uint64_t quiet_ms;   /* with nothing said, nothing running and nothing to read; 0: for ever */
};

struct connection_settings {
    uv_loop_t *loop;
    const struct method_table *table; /* borrowed, as is the next, for the connection's life */
    size_t line_limit_bytes;
    size_t unread_limit_bytes;
    struct connection_room *room; /* borrowed likewise */
    void *user;
    /* The handle is closed and every call has ended; called once, last. */
    void (*gone)(void *user, struct connection *connection);
};

/*
 * Accepts the connection that waits at `listener`. A negative libuv code on failure; then nothing
 * was accepted, or what was is closed again, and `gone` is not called.
 */
int connection_accept(const struct connection_settings *settings, uv_stream_t *listener,
                      struct connection **ret_connection) __attribute__((warn_unused_result));

/* Sends one fault that answers no request, and closes once it is read. */
void connection_refuse(struct connection *connection, const struct fault *fault);

/* Starts to read. */
void connection_start(struct connection *connection);

/* Takes no more calls: those not started yet are refused with -32006; closes once what is running
 * has ended and been read. */
void connection_drain(struct connection *connection);

/* Looks whether the peer has kept still for too long: one in the middle of a line is told, and then
 * closed as any other. To be called every now and then. */
void connection_check(struct connection *connection, const struct connection_patience *patience);

/* Milliseconds for which the peer has said nothing while it had nothing to wait for; 0 otherwise.
 */
uint64_t connection_quiet_ms(const struct connection *connection);

/* Closes at once; calls still running end unheard. */
void connection_close(struct connection *connection);

/* The list that the owner keeps connections in. */
struct connection_links {
    struct connection *next;
    struct connection *previous;
};

struct connection_links *connection_links(struct connection *connection);

#endif
