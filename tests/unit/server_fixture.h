/*
 * server_fixture: a server on a real loop and a real socket in a temporary folder, and its clients,
 * all in one thread: whoever waits turns the loop. The methods:
 *
 *   echo    answers its params at once            big     answers `bytes` letters
 *   hold    ends when the test says so            change  likewise, a change
 *
 * Static functions, since each test is one file. Include cmocka.h first.
 */
#ifndef UNDERTAG_TESTS_SERVER_FIXTURE_H
#define UNDERTAG_TESTS_SERVER_FIXTURE_H

#include <errno.h>
#include <signal.h>
#include <stdbool.h>
#include <stdio.h>
#include <sys/socket.h>
#include <sys/un.h>
#include <unistd.h>
#include <uv.h>

#include "daemon/server.h"
#include "tests/unit/jsons.h"
#include "tests/unit/store_fixture.h"

enum {
    CLIENTS = 4,
    HELD = 8,
    GUARD_MS = 60000 /* a test that waits for what never comes ends */
};

struct serving {
    char home[FIXTURE_PATH_BYTES];
    char path[FIXTURE_PATH_BYTES + 16];
    char error[SERVER_ERROR_BYTES];
    uv_loop_t loop;
    uv_timer_t guard;
    struct method_table table;
    struct server_settings settings;
    struct server *server;
    bool draining;
    int drained; /* how often `done` was called */
    int clients[CLIENTS];
    struct call *held[HELD];
    size_t held_count;
    size_t started;
    char *line; /* the last that a client read */
};

/* --- the methods --- */

static inline void serve_echo(struct call *call, const json_t *params)
{
    struct serving *serving = call_context(call);
    serving->started++;
    call_answer_take(call, json_deep_copy(params));
}

static inline void serve_hold(struct call *call, const json_t *params)
{
    (void)params;
    struct serving *serving = call_context(call);
    assert_true(serving->held_count < HELD);
    serving->started++;
    serving->held[serving->held_count++] = call;
}

static inline void serve_big(struct call *call, const json_t *params)
{
    struct serving *serving = call_context(call);
    size_t bytes = (size_t)json_integer_value(json_object_get(params, "bytes"));
    char *letters = malloc(bytes);
    assert_non_null(letters);
    memset(letters, 'x', bytes);
    serving->started++;
    call_answer_take(call, json_stringn(letters, bytes));
    free(letters);
}

static const struct method SERVED[] = {{"echo", METHOD_READ, RIGHT_READ, serve_echo},
                                       {"hold", METHOD_READ, RIGHT_READ, serve_hold},
                                       {"change", METHOD_CHANGE, RIGHT_FILE, serve_hold},
                                       {"big", METHOD_READ, RIGHT_READ, serve_big}};

/* --- the server --- */

static inline void serve(struct serving *serving)
{
    int code = server_new(&serving->loop, &serving->settings, &serving->table, &serving->server,
                          serving->error);
    if (code != 0) {
        fail_msg("%d: %s", code, serving->error);
    }
}

static inline void on_guard(uv_timer_t *timer)
{
    (void)timer;
    fail_msg("nothing more has come");
}

/* All but the server itself. */
static inline int serving_set_up_quietly(void **state)
{
    struct serving *serving = calloc(1, sizeof *serving);
    assert_non_null(serving);
    (void)signal(SIGPIPE, SIG_IGN); /* as main does */
    home_make(serving->home);
    (void)snprintf(serving->path, sizeof serving->path, "%s/socket", serving->home);
    serving->table = (struct method_table){
        .methods = SERVED, .count = sizeof SERVED / sizeof SERVED[0], .context = serving};
    serving->settings = (struct server_settings){.socket_path = serving->path,
                                                 .line_limit_bytes = 8 * 1024 * 1024,
                                                 .unread_limit_bytes = 1024 * 1024,
                                                 .wire_limit_bytes = 256 * 1024 * 1024,
                                                 .stalled_ms = GUARD_MS,
                                                 .connections_limit = 8,
                                                 .drain_ms = GUARD_MS};
    for (int i = 0; i < CLIENTS; i++) {
        serving->clients[i] = -1;
    }
    assert_int_equal(uv_loop_init(&serving->loop), 0);
    assert_int_equal(uv_timer_init(&serving->loop, &serving->guard), 0);
    assert_int_equal(uv_timer_start(&serving->guard, on_guard, GUARD_MS, 0), 0);
    *state = serving;
    return 0;
}

static inline int serving_set_up(void **state)
{
    int code = serving_set_up_quietly(state);
    serve(*state);
    return code;
}

static inline void on_drained(void *user)
{
    struct serving *serving = user;
    serving->drained++;
    serving->draining = false;
    serving->server = NULL;
}

/* Starts the drain, which is not over before this returns. */
static inline void drain(struct serving *serving)
{
    int before = serving->drained;
    serving->draining = true;
    server_drain(serving->server, on_drained, serving);
    assert_int_equal(serving->drained, before);
}

static inline void turn(struct serving *serving)
{
    (void)uv_run(&serving->loop, UV_RUN_ONCE);
}

static inline void end_held(struct serving *serving, size_t at)
{
    struct call *call = serving->held[at];
    assert_non_null(call);
    serving->held[at] = NULL;
    call_answer_take(call, json_integer((json_int_t)at));
}

/* Everything must end: the loop has nothing left to do, and closes. */
static inline int serving_tear_down(void **state)
{
    struct serving *serving = *state;
    for (size_t i = 0; i < serving->held_count; i++) {
        if (serving->held[i]) {
            end_held(serving, i);
        }
    }
    for (int i = 0; i < CLIENTS; i++) {
        if (serving->clients[i] >= 0) {
            assert_int_equal(close(serving->clients[i]), 0);
        }
    }
    if (serving->server && !serving->draining) {
        drain(serving);
    }
    uv_close((uv_handle_t *)&serving->guard, NULL);
    assert_int_equal(uv_run(&serving->loop, UV_RUN_DEFAULT), 0);
    assert_null(serving->server);
    assert_int_equal(uv_loop_close(&serving->loop), 0);
    home_remove(serving->home);
    free(serving->line);
    free(serving);
    return 0;
}

/* --- clients --- */

/* A socket bound to nothing, connected to the path. */
static inline int connected(const char *path)
{
    struct sockaddr_un address = {.sun_family = AF_UNIX};
    int fd = socket(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC | SOCK_NONBLOCK, 0);
    assert_true(fd >= 0);
    assert_true(strlen(path) < sizeof address.sun_path);
    memcpy(address.sun_path, path, strlen(path) + 1);
    assert_int_equal(connect(fd, (struct sockaddr *)&address, sizeof address), 0);
    return fd;
}

static inline void join(struct serving *serving, int client)
{
    assert_int_equal(serving->clients[client], -1);
    serving->clients[client] = connected(serving->path);
}

static inline void leave(struct serving *serving, int client)
{
    assert_int_equal(close(serving->clients[client]), 0);
    serving->clients[client] = -1;
}

static inline void say_bytes(struct serving *serving, int client, const char *bytes, size_t count)
{
    while (count > 0) {
        ssize_t written = write(serving->clients[client], bytes, count);
        if (written < 0) {
            assert_int_equal(errno, EAGAIN);
            turn(serving);
            continue;
        }
        bytes += written;
        count -= (size_t)written;
    }
}

static inline void say(struct serving *serving, int client, const char *text)
{
    char *copy = quoted(text);
    say_bytes(serving, client, copy, strlen(copy));
    free(copy);
}

/* A request as one line. */
static inline void ask(struct serving *serving, int client, int id, const char *method)
{
    char line[128];
    (void)snprintf(line, sizeof line,
                   "{'jsonrpc':'2.0','id':%d,'method':'%s','params':{'bytes':100000}}\n", id,
                   method);
    say(serving, client, line);
}

/* Takes from the socket what belongs to the line; says whether it has ended. */
static inline bool take_piece(struct serving *serving, int client, const char *piece, size_t count,
                              size_t *size)
{
    static char taken[65536];
    const char *end = memchr(piece, '\n', count);
    size_t more = end ? (size_t)(end - piece) + 1 : count;
    serving->line = realloc(serving->line, *size + more + 1);
    assert_non_null(serving->line);
    assert_int_equal(read(serving->clients[client], taken, more), more);
    memcpy(serving->line + *size, taken, more);
    *size += more;
    serving->line[end ? *size - 1 : *size] = '\0';
    return end != NULL;
}

/* The next line, without its end, until the next one is heard; NULL: the server has closed. */
static inline const char *hear(struct serving *serving, int client)
{
    static char piece[65536];
    size_t size = 0;
    free(serving->line);
    serving->line = NULL;
    for (;;) {
        ssize_t count = recv(serving->clients[client], piece, sizeof piece, MSG_PEEK);
        if (count < 0 && errno == EAGAIN) {
            turn(serving);
        } else if (count <= 0) {
            assert_int_equal(size, 0); /* nothing is ever cut */
            return NULL;
        } else if (take_piece(serving, client, piece, (size_t)count, &size)) {
            return serving->line;
        }
    }
}

static inline void assert_heard(struct serving *serving, int client, const char *expected)
{
    const char *line = hear(serving, client);
    assert_non_null(line);
    assert_json(line, expected);
}

/* An error of this code; its sentence stays in serving->line. `id` 0 is null. */
static inline void assert_heard_error(struct serving *serving, int client, int id, int code)
{
    const char *line = hear(serving, client);
    assert_non_null(line);
    json_t *answer = json_loads(line, 0, NULL);
    json_t *found = json_object_get(json_object_get(answer, "error"), "code");
    json_t *found_id = json_object_get(answer, "id");
    assert_int_equal(json_integer_value(found), code);
    assert_true(id == 0 ? json_is_null(found_id) : json_integer_value(found_id) == id);
    json_decref(answer);
}

static inline void wait_until_held(struct serving *serving, size_t count)
{
    while (serving->held_count < count) {
        turn(serving);
    }
}

static inline void wait_until_connections(struct serving *serving, unsigned count)
{
    while (server_connections(serving->server) != count) {
        turn(serving);
    }
}

static inline void wait_until_drained(struct serving *serving)
{
    while (serving->drained == 0) {
        turn(serving);
    }
    assert_int_equal(serving->drained, 1);
}

#define SERVING_TEST(name) cmocka_unit_test_setup_teardown(name, serving_set_up, serving_tear_down)

/* The test starts the server itself. */
#define QUIET_TEST(name)                                                                           \
    cmocka_unit_test_setup_teardown(name, serving_set_up_quietly, serving_tear_down)

#endif
