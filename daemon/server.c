/*
 * Happy path: server_new locks, binds and listens; every accepted connection is put in the list and
 * takes itself out when it is gone; server_drain closes the listener, drains all connections and
 * frees the server once the last handle is closed.
 *
 * Failure paths: what server_new had taken it gives back, the lock last; the handles it had opened
 * close in the loop, after which the memory is freed.
 */
#include "daemon/server.h"

#include <assert.h>
#include <errno.h>
#include <limits.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/stat.h>
#include <sys/un.h>
#include <unistd.h>

#include "daemon/connection.h"
#include "daemon/lockfile.h"

enum {
    BACKLOG = 128,
    ACCEPT_AGAIN_MS = 100,
    MOST_CHECK_MS = 1000,   /* between looks for peers that stand still */
    SOCKET_MODE_MASK = 0117 /* leaves 0660 */
};

struct server {
    struct server_settings settings;
    char socket_path[sizeof((struct sockaddr_un *)0)->sun_path];
    struct connection_settings connections;
    struct connection_room room;
    struct connection *first;
    unsigned open;
    uv_pipe_t listener;
    uv_timer_t drain_timer;
    uv_timer_t accept_timer;
    uv_timer_t check_timer;
    unsigned handles; /* of the four above, not closed yet */
    int lock_fd;
    uint32_t socket_group;
    bool draining;
    void (*done)(void *user);
    void *user;
};

/* --- the end ---------------------------------------------------------------------------------- */

static void free_server(struct server *server)
{
    if (server->lock_fd >= 0) {
        (void)close(server->lock_fd); /* ends the lock; nothing is written there */
    }
    free(server);
}

static void on_handle_closed(uv_handle_t *handle)
{
    struct server *server = handle->data;
    if (--server->handles > 0) {
        return;
    }
    void (*done)(void *) = server->done;
    void *user = server->user;
    free_server(server);
    if (done) {
        done(user);
    }
}

/* --- the connections ----------------------------------------------------------------------------
 */

static void free_when_over(struct server *server)
{
    if (!server->draining || server->open > 0) {
        return;
    }
    if (!uv_is_closing((uv_handle_t *)&server->drain_timer)) {
        uv_close((uv_handle_t *)&server->drain_timer, on_handle_closed);
        uv_close((uv_handle_t *)&server->accept_timer, on_handle_closed);
        uv_close((uv_handle_t *)&server->check_timer, on_handle_closed);
    }
}

static void on_gone(void *user, struct connection *connection)
{
    struct server *server = user;
    struct connection_links *links = connection_links(connection);
    if (links->previous) {
        connection_links(links->previous)->next = links->next;
    } else {
        server->first = links->next;
    }
    if (links->next) {
        connection_links(links->next)->previous = links->previous;
    }
    server->open--;
    free_when_over(server);
}

static void add_connection(struct server *server, struct connection *connection)
{
    connection_links(connection)->next = server->first;
    if (server->first) {
        connection_links(server->first)->previous = connection;
    }
    server->first = connection;
    server->open++;
}

static void on_connection(uv_stream_t *listener, int status);

static void on_accept_again(uv_timer_t *timer)
{
    struct server *server = timer->data;
    if (!server->draining) {
        on_connection((uv_stream_t *)&server->listener, 0);
    }
}

/* libuv looks away until what it holds is accepted; without memory for that it must be later. */
static void look_again_later(struct server *server, int code)
{
    if (code != UV_EAGAIN) { /* then nothing is held */
        code = uv_timer_start(&server->accept_timer, on_accept_again, ACCEPT_AGAIN_MS, 0);
        assert(code == 0); /* fails only without a callback */
    }
}

/* Whoever has asked for nothing for longest, and for long enough, makes room for another. */
static bool close_quietest(struct server *server)
{
    struct connection *quietest = NULL;
    uint64_t most_ms = server->settings.stalled_ms;
    for (struct connection *c = server->first; c; c = connection_links(c)->next) {
        if (connection_quiet_ms(c) > most_ms) {
            most_ms = connection_quiet_ms(c);
            quietest = c;
        }
    }
    if (quietest) {
        connection_close(quietest);
    }
    return quietest;
}

static void on_connection(uv_stream_t *listener, int status)
{
    struct server *server = listener->data;
    struct connection *connection = NULL;
    if (status < 0 || server->draining) {
        return; /* libuv goes on watching */
    }
    int code = connection_accept(&server->connections, listener, &connection);
    if (code < 0) {
        look_again_later(server, code);
        return;
    }
    add_connection(server, connection);
    if (server->open > server->settings.connections_limit && !close_quietest(server)) {
        struct fault fault = {0};
        (void)fault_set(&fault, FAULT_LIMIT, NULL,
                        "There are %u connections open already, which is the limit; try again "
                        "later.",
                        server->settings.connections_limit);
        connection_refuse(connection, &fault);
    } else {
        connection_start(connection);
    }
}

/* Closing takes a connection out of the list, but later. */
static void on_check(uv_timer_t *timer)
{
    struct server *server = timer->data;
    const struct connection_patience patience = {.stalled_ms = server->settings.stalled_ms,
                                                 .quiet_ms = server->settings.quiet_ms};
    for (struct connection *c = server->first; c; c = connection_links(c)->next) {
        connection_check(c, &patience);
    }
}

static void start_checking(struct server *server)
{
    uint64_t every_ms = server->settings.stalled_ms / 4 + 1;
    every_ms = every_ms < MOST_CHECK_MS ? every_ms : MOST_CHECK_MS;
    int code = uv_timer_start(&server->check_timer, on_check, every_ms, every_ms);
    assert(code == 0); /* fails only without a callback */
}

/* --- listening ----------------------------------------------------------------------------------
 */

static int fail(char *error, int code, const char *what, const char *path)
{
    (void)snprintf(error, SERVER_ERROR_BYTES, "%s %.300s: %s", what, path, uv_strerror(code));
    return code;
}

static int take_path(struct server *server, const char *path, char *error)
{
    int length = snprintf(server->socket_path, sizeof server->socket_path, "%s", path);
    if (length <= 0 || (size_t)length >= sizeof server->socket_path) {
        (void)snprintf(error, SERVER_ERROR_BYTES,
                       "the socket's path is 1 to %zu bytes long, not %zu: choose a shorter one",
                       sizeof server->socket_path - 1, strlen(path));
        return UV_ENAMETOOLONG;
    }
    return 0;
}

/* The path of a socket that was passed in; one without a file has none. */
static void take_path_of(struct server *server, int fd)
{
    struct sockaddr_un address = {0};
    socklen_t size = sizeof address;
    if (getsockname(fd, (struct sockaddr *)&address, &size) == 0 && address.sun_path[0] != '\0') {
        (void)snprintf(server->socket_path, sizeof server->socket_path, "%.*s",
                       (int)sizeof address.sun_path - 1, address.sun_path);
    }
}

static int take_lock(struct server *server, char *error)
{
    char path[sizeof server->socket_path + 8];
    (void)snprintf(path, sizeof path, "%s.lock", server->socket_path);
    int code = lockfile_take(path, &server->lock_fd, error);
    return code == -EWOULDBLOCK ? UV_EADDRINUSE : code;
}

/* Whoever holds the lock knows that no daemon listens there. What is no socket stays. */
static int remove_stale_socket(const char *path, char *error)
{
    struct stat status;
    if (lstat(path, &status) < 0) {
        return errno == ENOENT ? 0 : fail(error, -errno, "cannot look at", path);
    }
    if (!S_ISSOCK(status.st_mode)) {
        return fail(error, UV_EEXIST, "there is something that is no socket at", path);
    }
    return unlink(path) < 0 ? fail(error, -errno, "cannot remove the stale socket", path) : 0;
}

/* Nobody else may listen at the path, and what a daemon that died has left there goes. */
static int claim_path(struct server *server, char *error)
{
    int code = take_lock(server, error);
    return code < 0 ? code : remove_stale_socket(server->socket_path, error);
}

/* The mode must be right from the first moment: what chmod makes right later was open before. */
static int bind_and_listen(struct server *server, char *error)
{
    mode_t mask = umask(SOCKET_MODE_MASK);
    int code = uv_pipe_bind(&server->listener, server->socket_path);
    (void)umask(mask); /* cannot fail */
    if (code == 0) {
        code = uv_listen((uv_stream_t *)&server->listener, BACKLOG, on_connection);
    }
    return code < 0 ? fail(error, code, "cannot listen at", server->socket_path) : 0;
}

/* Whoever may connect by the file's mode may be a member of its group. */
static uint32_t group_of(const char *path)
{
    struct stat status;
    return lstat(path, &status) == 0 && S_ISSOCK(status.st_mode) ? status.st_gid : RIGHTS_NO_ID;
}

static int listen_at_passed(struct server *server, char *error)
{
    int fd = server->settings.passed_fd;
    int code = uv_pipe_open(&server->listener, fd);
    if (code < 0) {
        (void)close(fd); /* it was not taken */
    } else {
        code = uv_listen((uv_stream_t *)&server->listener, BACKLOG, on_connection);
    }
    return code < 0 ? fail(error, code, "cannot listen at", server->socket_path) : 0;
}

static int init_handles(uv_loop_t *loop, struct server *server)
{
    int code = uv_pipe_init(loop, &server->listener, 0);
    if (code < 0) {
        return code;
    }
    code = uv_timer_init(loop, &server->drain_timer);
    assert(code == 0); /* libuv documents no failure */
    code = uv_timer_init(loop, &server->accept_timer);
    assert(code == 0);
    code = uv_timer_init(loop, &server->check_timer);
    assert(code == 0);
    server->listener.data = server;
    server->drain_timer.data = server;
    server->accept_timer.data = server;
    server->check_timer.data = server;
    server->handles = 4;
    return 0;
}

static int begin(uv_loop_t *loop, struct server *server, char *error)
{
    int passed_fd = server->settings.passed_fd;
    int code = 0;
    if (passed_fd > 0) {
        take_path_of(server, passed_fd);
    } else {
        code = take_path(server, server->settings.socket_path, error);
        code = code < 0 ? code : claim_path(server, error);
    }
    code = code < 0 ? code : init_handles(loop, server);
    if (code < 0 && passed_fd > 0) {
        (void)close(passed_fd); /* nobody is connected to it yet */
    }
    return code;
}

int server_new(uv_loop_t *loop, const struct server_settings *settings,
               const struct method_table *table, struct server **ret_server, char *error)
{
    struct server *server = calloc(1, sizeof *server);
    if (!server) {
        (void)snprintf(error, SERVER_ERROR_BYTES, "cannot serve: %s", uv_strerror(UV_ENOMEM));
        if (settings->passed_fd > 0) {
            (void)close(settings->passed_fd); /* nobody is connected to it yet */
        }
        return UV_ENOMEM;
    }
    server->settings = *settings;
    server->lock_fd = -1;
    server->room.limit_bytes = settings->wire_limit_bytes;
    server->connections =
        (struct connection_settings){.loop = loop,
                                     .table = table,
                                     .line_limit_bytes = settings->line_limit_bytes,
                                     .unread_limit_bytes = settings->unread_limit_bytes,
                                     .room = &server->room,
                                     .user = server,
                                     .gone = on_gone};
    int code = begin(loop, server, error);
    if (code < 0) {
        free_server(server);
        return code;
    }
    code =
        settings->passed_fd > 0 ? listen_at_passed(server, error) : bind_and_listen(server, error);
    if (code < 0) {
        uv_close((uv_handle_t *)&server->listener, on_handle_closed);
        uv_close((uv_handle_t *)&server->drain_timer, on_handle_closed);
        uv_close((uv_handle_t *)&server->accept_timer, on_handle_closed);
        uv_close((uv_handle_t *)&server->check_timer, on_handle_closed);
        return code;
    }
    start_checking(server);
    server->socket_group = group_of(server->socket_path);
    *ret_server = server;
    return 0;
}

const char *server_socket_path(const struct server *server)
{
    return server->socket_path;
}

uint32_t server_socket_group(const struct server *server)
{
    return server->socket_group;
}

unsigned server_connections(const struct server *server)
{
    return server->open;
}

/* --- draining -----------------------------------------------------------------------------------
 */

static void on_drain_over(uv_timer_t *timer)
{
    struct server *server = timer->data;
    for (struct connection *c = server->first; c; c = connection_links(c)->next) {
        connection_close(c); /* takes itself out of the list later */
    }
}

void server_drain(struct server *server, void (*done)(void *user), void *user)
{
    server->draining = true;
    server->done = done;
    server->user = user;
    /* Closing a listener that was bound here removes the socket's file, too: we hold the lock until
     * the end. */
    uv_close((uv_handle_t *)&server->listener, on_handle_closed);
    int code = uv_timer_start(&server->drain_timer, on_drain_over, server->settings.drain_ms, 0);
    assert(code == 0); /* fails only without a callback */
    for (struct connection *c = server->first; c; c = connection_links(c)->next) {
        connection_drain(c);
    }
    free_when_over(server);
}
