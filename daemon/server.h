/*
 * server: the listening socket, its connections, and their end.
 *
 * Happy path: server_new takes the lock beside the socket (PATH.lock), removes a stale socket (only
 * the lock's holder may), binds with mode 0660 from the first moment and listens. server_drain
 * stops listening, refuses new calls with -32006, lets running calls end and their answers be read
 * (for drain_ms at most), closes everything, and calls back once. Loop thread only.
 *
 * A socket that was passed in, bound and listening already, belongs to whoever passed it: there is
 * no lock, and its file stays at the end.
 */
#ifndef UNDERTAG_SERVER_H
#define UNDERTAG_SERVER_H

#include <stddef.h>
#include <uv.h>

#include "daemon/call.h"

struct server;

struct server_settings {
    const char *socket_path;   /* copied; at most 107 bytes, longer is refused with a sentence */
    int passed_fd;             /* instead: one that was passed in, taken in any case; 0: none */
    size_t line_limit_bytes;   /* a longer line gets -32003 and is skipped without being held */
    size_t unread_limit_bytes; /* unread answers a connection before reading from it stops */
    size_t wire_limit_bytes;   /* what all connections hold together, see connection.h */
    unsigned stalled_ms;       /* the longest that a line or a reading of answers may stand still */
    uint64_t quiet_ms;         /* the longest that a connection is kept for nothing; 0: for ever */
    unsigned connections_limit; /* one more gets a -32003 line and is closed, unless a
                                   peer that was quiet for stalled_ms can make room */
    unsigned drain_ms;          /* the longest time server_drain waits for slow readers */
};

enum {
    SERVER_ERROR_BYTES = 512
};

/*
 * Starts to listen. The table is borrowed and must outlive the server. On failure returns a
 * negative libuv code, writes one sentence for people to `error` (SERVER_ERROR_BYTES), and leaves
 * *ret_server untouched. A second server on the same path is refused with UV_EADDRINUSE.
 */
int server_new(uv_loop_t *loop, const struct server_settings *settings,
               const struct method_table *table, struct server **ret_server, char *error)
    __attribute__((warn_unused_result));

/* Where it listens; of a socket that was passed in, as the system has it. */
const char *server_socket_path(const struct server *server);

/* The group that the socket's file belongs to; RIGHTS_NO_ID where it cannot be told. */
uint32_t server_socket_group(const struct server *server);

/* Connections open now. */
unsigned server_connections(const struct server *server);

/* Drains and frees the server; `done` is called once, never before this returns. */
void server_drain(struct server *server, void (*done)(void *user), void *user);

#endif
