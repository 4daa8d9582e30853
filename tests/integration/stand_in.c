#include "tests/integration/stand_in.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <poll.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/un.h>
#include <unistd.h>

enum {
    CONNECTIONS = 8,
    LINE_BYTES = 64 * 1024,
    ANSWER_BYTES = 1024 * 1024
};

/* In the thread nothing may use cmocka's assertions: what fails there closes the connection, which
 * the client tells. */
struct connection {
    int fd; /* 0: none */
    int daemon;
    size_t used;
    char line[LINE_BYTES];
};

void rehearsal_deinit(struct rehearsal *rehearsal)
{
    for (size_t i = 0; i < rehearsal->count; i++) {
        json_decref(rehearsal->answers[i]);
    }
    *rehearsal = (struct rehearsal){0};
}

static int open_socket(const char *path, struct sockaddr_un *ret_address)
{
    *ret_address = (struct sockaddr_un){.sun_family = AF_UNIX};
    if (strlen(path) >= sizeof ret_address->sun_path) {
        return -1;
    }
    memcpy(ret_address->sun_path, path, strlen(path) + 1);
    return socket(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC, 0);
}

static bool send_all(int fd, const char *bytes, size_t size)
{
    while (size > 0) {
        ssize_t sent = send(fd, bytes, size, MSG_NOSIGNAL);
        if (sent < 0) {
            return false; /* the client may leave before all is said */
        }
        bytes += sent;
        size -= (size_t)sent;
    }
    return true;
}

/* --- a real daemon's answers ----------------------------------------------------------------- */

static int connect_to(const char *path)
{
    struct sockaddr_un address;
    int fd = open_socket(path, &address);
    if (fd >= 0 && connect(fd, (const struct sockaddr *)&address, sizeof address) != 0) {
        (void)close(fd); /* nothing came of it */
        return -1;
    }
    return fd;
}

/* Reads a line with its end; the daemon sends nothing beyond it. */
static bool read_line(int fd, char *line, size_t size)
{
    size_t used = 0;
    while (used + 1 < size) {
        ssize_t count = recv(fd, line + used, size - used - 1, 0);
        if (count <= 0) {
            return false;
        }
        used += (size_t)count;
        line[used] = '\0';
        if (line[used - 1] == '\n') {
            return true;
        }
    }
    return false;
}

static bool pass_on(struct stand_in *stand_in, struct connection *connection, size_t length)
{
    struct rehearsal *rehearsal = stand_in->rehearsal;
    char *answer = malloc(ANSWER_BYTES);
    bool is_well = false;
    if (connection->daemon < 0) {
        connection->daemon = connect_to(stand_in->daemon);
    }
    if (answer && connection->daemon >= 0 && rehearsal->count < STAND_IN_ANSWERS &&
        send_all(connection->daemon, connection->line, length) &&
        read_line(connection->daemon, answer, ANSWER_BYTES)) {
        json_t *json = json_loads(answer, 0, NULL);
        if (json) {
            rehearsal->answers[rehearsal->count++] = json;
            is_well = send_all(connection->fd, answer, strlen(answer));
        }
    }
    free(answer);
    return is_well;
}

/* --- its own --------------------------------------------------------------------------------- */

/* Sends a text with the id in the place of #. */
static bool send_instead(int fd, const char *text, long long id)
{
    char figure[32];
    int length = snprintf(figure, sizeof figure, "%lld", id);
    for (;;) {
        size_t plain = strcspn(text, "#");
        if (!send_all(fd, text, plain)) {
            return false;
        }
        if (text[plain] == '\0') {
            return true;
        }
        if (!send_all(fd, figure, (size_t)length)) {
            return false;
        }
        text += plain + 1;
    }
}

static bool repeat(const struct stand_in *stand_in, size_t at, int fd, json_t *id)
{
    const struct rehearsal *rehearsal = stand_in->rehearsal;
    size_t last = rehearsal->count - 1;
    json_t *answer = json_copy(rehearsal->answers[at < last ? at : last]);
    char *text = json_object_set(answer, "id", id) == 0 ? json_dumps(answer, JSON_COMPACT) : NULL;
    bool is_well = text && send_all(fd, text, strlen(text)) && send_all(fd, "\n", 1);
    free(text);
    json_decref(answer);
    return is_well;
}

static bool answer(struct stand_in *stand_in, struct connection *connection)
{
    json_t *request = json_loads(connection->line, JSON_DISABLE_EOF_CHECK, NULL);
    json_t *id = json_object_get(request, "id");
    size_t at = stand_in->asked++;
    bool goes_on = false;
    if (stand_in->instead && at == stand_in->spoiled) {
        goes_on = send_instead(connection->fd, stand_in->instead, json_integer_value(id)) &&
                  !stand_in->closes;
    } else {
        goes_on = id && repeat(stand_in, at, connection->fd, id);
    }
    json_decref(request);
    return goes_on;
}

/* --- the connections ------------------------------------------------------------------------- */

static void drop(struct connection *connection)
{
    if (connection->daemon >= 0) {
        (void)close(connection->daemon); /* all that was asked is answered */
    }
    (void)close(connection->fd); /* the client knows what it has */
    connection->fd = 0;
}

static void accept_one(struct connection *connections, int fd)
{
    for (size_t i = 0; i < CONNECTIONS; i++) {
        if (connections[i].fd == 0) {
            connections[i].fd = fd;
            connections[i].daemon = -1;
            connections[i].used = 0;
            return;
        }
    }
    (void)close(fd); /* one too many: its client says so */
}

/* Takes what has come; false where the connection is at its end. */
static bool serve(struct stand_in *stand_in, struct connection *connection)
{
    ssize_t count = recv(connection->fd, connection->line + connection->used,
                         sizeof connection->line - connection->used - 1, 0);
    if (count <= 0) {
        return false;
    }
    connection->used += (size_t)count;
    connection->line[connection->used] = '\0';
    bool goes_on = true;
    const char *end = NULL;
    while (goes_on && (end = strchr(connection->line, '\n'))) {
        size_t length = (size_t)(end - connection->line) + 1;
        (void)pthread_mutex_lock(&stand_in->mutex); /* it is not of a kind that fails */
        goes_on =
            stand_in->daemon ? pass_on(stand_in, connection, length) : answer(stand_in, connection);
        (void)pthread_mutex_unlock(&stand_in->mutex);
        connection->used -= length;
        memmove(connection->line, connection->line + length, connection->used + 1);
    }
    return goes_on;
}

static void *serve_all(void *argument)
{
    struct stand_in *stand_in = argument;
    struct connection *connections = calloc(CONNECTIONS, sizeof *connections);
    while (connections) {
        struct pollfd events[CONNECTIONS + 1] = {{.fd = stand_in->listener, .events = POLLIN}};
        for (size_t i = 0; i < CONNECTIONS; i++) {
            events[i + 1].fd = connections[i].fd > 0 ? connections[i].fd : -1;
            events[i + 1].events = POLLIN;
        }
        (void)poll(events, CONNECTIONS + 1, -1); /* what is not ready then is looked at again */
        int fd = events[0].revents ? accept(stand_in->listener, NULL, NULL) : -1;
        if (events[0].revents && fd < 0) {
            break; /* the listener was shut down */
        }
        for (size_t i = 0; i < CONNECTIONS; i++) {
            if (events[i + 1].revents && !serve(stand_in, &connections[i])) {
                drop(&connections[i]);
            }
        }
        if (fd >= 0) {
            accept_one(connections, fd);
        }
    }
    for (size_t i = 0; connections && i < CONNECTIONS; i++) {
        if (connections[i].fd > 0) {
            drop(&connections[i]);
        }
    }
    free(connections);
    return NULL;
}

/* --- for the test ---------------------------------------------------------------------------- */

void stand_in_start(struct stand_in *stand_in, const char *path)
{
    struct sockaddr_un address;
    *stand_in = (struct stand_in){.path = path, .listener = open_socket(path, &address)};
    assert_true(stand_in->listener >= 0);
    assert_int_equal(bind(stand_in->listener, (const struct sockaddr *)&address, sizeof address),
                     0);
    assert_int_equal(listen(stand_in->listener, CONNECTIONS), 0);
    assert_int_equal(pthread_mutex_init(&stand_in->mutex, NULL), 0);
    assert_int_equal(pthread_create(&stand_in->thread, NULL, serve_all, stand_in), 0);
}

void stand_in_stop(struct stand_in *stand_in)
{
    assert_int_equal(shutdown(stand_in->listener, SHUT_RDWR), 0);
    assert_int_equal(pthread_join(stand_in->thread, NULL), 0);
    assert_int_equal(close(stand_in->listener), 0);
    assert_int_equal(unlink(stand_in->path), 0);
    free(stand_in->instead);
    assert_int_equal(pthread_mutex_destroy(&stand_in->mutex), 0);
}

/* Takes the members that a test sets, and begins to count anew. The text is a copy: the client may
 * be at its end before the thread has seen that there is nothing more to send. */
static void become(struct stand_in *stand_in, const struct stand_in *wanted, const char *instead)
{
    char *copy = instead ? strdup(instead) : NULL;
    assert_true(copy || !instead);
    assert_int_equal(pthread_mutex_lock(&stand_in->mutex), 0);
    stand_in->daemon = wanted->daemon;
    stand_in->rehearsal = wanted->rehearsal;
    stand_in->spoiled = wanted->spoiled;
    free(stand_in->instead);
    stand_in->instead = copy;
    stand_in->closes = wanted->closes;
    stand_in->asked = 0;
    assert_int_equal(pthread_mutex_unlock(&stand_in->mutex), 0);
}

void stand_in_pass_on(struct stand_in *stand_in, const char *daemon, struct rehearsal *rehearsal)
{
    become(stand_in, &(struct stand_in){.daemon = daemon, .rehearsal = rehearsal}, NULL);
}

void stand_in_rest(struct stand_in *stand_in)
{
    become(stand_in, &(struct stand_in){0}, NULL);
}

void stand_in_repeat(struct stand_in *stand_in, struct rehearsal *rehearsal)
{
    assert_true(rehearsal->count > 0);
    become(stand_in, &(struct stand_in){.rehearsal = rehearsal}, NULL);
}

void stand_in_spoil(struct stand_in *stand_in, struct rehearsal *rehearsal, size_t at,
                    const char *instead, bool closes)
{
    assert_true(at < rehearsal->count);
    become(stand_in, &(struct stand_in){.rehearsal = rehearsal, .spoiled = at, .closes = closes},
           instead);
}

size_t stand_in_asked(struct stand_in *stand_in)
{
    assert_int_equal(pthread_mutex_lock(&stand_in->mutex), 0);
    size_t asked = stand_in->asked;
    assert_int_equal(pthread_mutex_unlock(&stand_in->mutex), 0);
    return asked;
}
