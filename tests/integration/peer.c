#include "tests/integration/peer.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <errno.h>
#include <grp.h>
#include <poll.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/un.h>
#include <sys/wait.h>
#include <unistd.h>

#include "tests/integration/child.h"

enum {
    READ_BYTES = 64 * 1024
};

/* --- connecting ------------------------------------------------------------------------------ */

static void init(struct peer *peer)
{
    *peer = (struct peer){.fd = socket(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC, 0)};
    assert_true(peer->fd >= 0);
    peer->kept = json_array();
    peer->bytes = malloc(READ_BYTES);
    peer->capacity = READ_BYTES;
    assert_true(peer->kept && peer->bytes);
}

static int connect_to(const struct peer *peer, const char *socket_path)
{
    struct sockaddr_un address = {.sun_family = AF_UNIX};
    if (strlen(socket_path) >= sizeof address.sun_path) {
        return -1;
    }
    memcpy(address.sun_path, socket_path, strlen(socket_path) + 1);
    return connect(peer->fd, (const struct sockaddr *)&address, sizeof address);
}

void peer_open(struct peer *peer, const char *socket_path)
{
    init(peer);
    assert_int_equal(connect_to(peer, socket_path), 0);
}

/* Changes who this process is, for good; the groups first, while it still may. */
static int become(struct person person)
{
    gid_t others[] = {person.other_gid};
    if (setgroups(person.other_gid > 0, others) < 0 ||
        setresgid(person.gid, person.gid, person.gid) < 0 ||
        setresuid(person.uid, person.uid, person.uid) < 0) {
        return -1;
    }
    return 0;
}

/* The kernel notes who connects, not who speaks (unix(7)): so a child connects for us. */
void peer_open_as(struct peer *peer, const char *socket_path, struct person person)
{
    int status = -1;
    init(peer);
    pid_t child = fork();
    assert_true(child >= 0);
    if (child == 0) {
        _exit(become(person) == 0 && connect_to(peer, socket_path) == 0 ? 0 : 1);
    }
    assert_int_equal(waitpid(child, &status, 0), child);
    assert_int_equal(status, 0);
}

void peer_close(struct peer *peer)
{
    if (peer->fd >= 0) {
        (void)close(peer->fd); /* what was sent and not answered is not missed */
    }
    free(peer->bytes);
    json_decref(peer->kept);
    *peer = (struct peer){.fd = -1};
}

void peer_end_saying(struct peer *peer)
{
    assert_int_equal(shutdown(peer->fd, SHUT_WR), 0);
}

/* --- bytes ----------------------------------------------------------------------------------- */

static void wait_until(const struct peer *peer, short events)
{
    struct pollfd line = {.fd = peer->fd, .events = events};
    if (poll(&line, 1, PATIENCE_MS) != 1) {
        fail_msg("nothing was heard of the daemon for %d ms", PATIENCE_MS);
    }
}

size_t peer_offer(struct peer *peer, const char *bytes, size_t size)
{
    ssize_t sent = send(peer->fd, bytes, size, MSG_NOSIGNAL | MSG_DONTWAIT);
    assert_true(sent >= 0 || errno == EAGAIN);
    return sent > 0 ? (size_t)sent : 0;
}

void peer_send(struct peer *peer, const char *bytes, size_t size)
{
    for (size_t sent = 0; sent < size;) {
        wait_until(peer, POLLOUT);
        sent += peer_offer(peer, bytes + sent, size - sent);
    }
}

bool peer_has_something(const struct peer *peer)
{
    struct pollfd line = {.fd = peer->fd, .events = POLLIN};
    return peer->start < peer->end || poll(&line, 1, 0) == 1;
}

/* Reads what is there; false once there will be nothing more. */
static bool read_more(struct peer *peer)
{
    if (peer->start > 0) {
        memmove(peer->bytes, peer->bytes + peer->start, peer->end - peer->start);
        peer->end -= peer->start;
        peer->start = 0;
    }
    if (peer->capacity < peer->end + READ_BYTES) {
        peer->capacity = 2 * peer->capacity + READ_BYTES;
        peer->bytes = realloc(peer->bytes, peer->capacity);
        assert_non_null(peer->bytes);
    }
    wait_until(peer, POLLIN);
    ssize_t count = recv(peer->fd, peer->bytes + peer->end, READ_BYTES, 0);
    assert_true(count >= 0 || errno == ECONNRESET); /* where it closed on what it had not read */
    peer->end += count > 0 ? (size_t)count : 0;
    return count > 0;
}

const char *peer_line(struct peer *peer)
{
    size_t looked_at = 0;
    for (;;) {
        char *start = peer->bytes + peer->start;
        size_t size = peer->end - peer->start;
        char *end = size > looked_at ? memchr(start + looked_at, '\n', size - looked_at) : NULL;
        if (end) {
            *end = '\0';
            peer->start += (size_t)(end - start) + 1;
            return start;
        }
        looked_at = size;
        if (!read_more(peer)) {
            assert_true(peer->start == peer->end || peer->may_be_cut);
            return NULL;
        }
    }
}

/* --- JSON ------------------------------------------------------------------------------------ */

/* Formats as by printf, with " for '; on the heap. */
__attribute__((format(printf, 1, 0))) static char *format_json(const char *format, va_list list)
{
    char *text = NULL;
    int length = vasprintf(&text, format, list);
    assert_true(length >= 0);
    for (char *at = text; (at = strchr(at, '\'')); at++) {
        *at = '"';
    }
    return text;
}

static json_t *keep(struct peer *peer, json_t *json)
{
    assert_int_equal(json_array_append_new(peer->kept, json), 0);
    return json;
}

json_t *peer_answer(struct peer *peer)
{
    const char *line = peer_line(peer);
    assert_non_null(line);
    json_t *json = json_loads(line, JSON_REJECT_DUPLICATES, NULL);
    if (!json) {
        fail_msg("this is not JSON: %.200s", line);
    }
    return keep(peer, json);
}

void peer_say(struct peer *peer, const char *format, ...)
{
    va_list list;
    va_start(list, format);
    char *text = format_json(format, list);
    va_end(list);
    peer_send(peer, text, strlen(text));
    peer_send(peer, "\n", 1);
    free(text);
}

/* --- requests -------------------------------------------------------------------------------- */

__attribute__((format(printf, 3, 0))) static unsigned request(struct peer *peer, const char *method,
                                                              const char *params, va_list list)
{
    char *text = format_json(params, list);
    char *line = NULL;
    unsigned id = ++peer->last_id;
    int length =
        asprintf(&line, "{\"jsonrpc\":\"2.0\",\"id\":%u,\"method\":\"%s\",\"params\":%s}\n", id,
                 method, text);
    assert_true(length > 0);
    peer_send(peer, line, (size_t)length);
    free(line);
    free(text);
    return id;
}

unsigned peer_request(struct peer *peer, const char *method, const char *params, ...)
{
    va_list list;
    va_start(list, params);
    unsigned id = request(peer, method, params, list);
    va_end(list);
    return id;
}

static json_t *member_of_answer(struct peer *peer, unsigned id, const char *member)
{
    json_t *answer = peer_answer(peer);
    assert_int_equal(whole(answer, "id"), id);
    json_t *found = json_object_get(answer, member);
    if (!found || json_object_size(answer) != 3) {
        fail_msg("no %s: %s", member, text_of(peer, answer));
    }
    return found;
}

json_t *peer_result(struct peer *peer, unsigned id)
{
    return member_of_answer(peer, id, "result");
}

json_t *peer_error(struct peer *peer, unsigned id)
{
    return member_of_answer(peer, id, "error");
}

json_t *ask(struct peer *peer, const char *method, const char *params, ...)
{
    va_list list;
    va_start(list, params);
    unsigned id = request(peer, method, params, list);
    va_end(list);
    return peer_result(peer, id);
}

json_t *ask_refused(struct peer *peer, const char *method, const char *params, ...)
{
    va_list list;
    va_start(list, params);
    unsigned id = request(peer, method, params, list);
    va_end(list);
    return peer_error(peer, id);
}

json_int_t ask_seq(struct peer *peer)
{
    return whole(ask(peer, "daemon.state", "{}"), "seq");
}

json_int_t ask_learned(struct peer *peer)
{
    return whole(ask(peer, "daemon.state", "{}"), "learned");
}

void wait_until_state(struct peer *peer, const char *member, json_int_t value)
{
    enum {
        ASK_EVERY_MS = 2
    };
    for (int waited_ms = 0; whole(ask(peer, "daemon.state", "{}"), member) != value;
         waited_ms += ASK_EVERY_MS) {
        if (waited_ms > PATIENCE_MS) {
            fail_msg("daemon.state never had %s = %lld", member, (long long)value);
        }
        (void)poll(NULL, 0, ASK_EVERY_MS); /* between two questions: learning needs the core */
    }
}

json_int_t ask_model_bytes(struct peer *peer)
{
    return whole(json_object_get(ask(peer, "daemon.state", "{}"), "disk"), "model");
}

void wait_until_model_takes(struct peer *peer, json_int_t bytes)
{
    enum {
        ASK_EVERY_MS = 20
    };
    for (int waited_ms = 0; ask_model_bytes(peer) <= bytes; waited_ms += ASK_EVERY_MS) {
        if (waited_ms > PATIENCE_MS) {
            fail_msg("the model's file never had more than %lld bytes", (long long)bytes);
        }
        (void)poll(NULL, 0, ASK_EVERY_MS);
    }
}

void wait_until_learned(struct peer *peer)
{
    wait_until_state(peer, "learned", ask_seq(peer));
}

/* --- looking into it ------------------------------------------------------------------------- */

json_int_t whole(const json_t *object, const char *member)
{
    const json_t *value = json_object_get(object, member);
    assert_true(json_is_integer(value));
    return json_integer_value(value);
}

double number(const json_t *object, const char *member)
{
    const json_t *value = json_object_get(object, member);
    assert_true(json_is_number(value));
    return json_number_value(value);
}

const char *string(const json_t *object, const char *member)
{
    const json_t *value = json_object_get(object, member);
    assert_true(json_is_string(value));
    return json_string_value(value);
}

const char *keep_text(struct peer *peer, const char *text)
{
    return json_string_value(keep(peer, json_string(text)));
}

const char *text_of(struct peer *peer, const json_t *json)
{
    char *text = json_dumps(json, JSON_COMPACT | JSON_ENCODE_ANY);
    assert_non_null(text);
    const char *kept = keep_text(peer, text);
    free(text);
    return kept;
}

__attribute__((format(printf, 1, 2))) static json_t *parse(const char *format, ...)
{
    va_list list;
    va_start(list, format);
    char *text = format_json(format, list);
    va_end(list);
    json_t *json = json_loads(text, JSON_DECODE_ANY, NULL);
    free(text);
    assert_non_null(json);
    return json;
}

static void assert_equal(const json_t *json, const json_t *wanted)
{
    if (!json_equal(json, wanted)) {
        char *text = json_dumps(json, JSON_COMPACT | JSON_ENCODE_ANY);
        char *wanted_text = json_dumps(wanted, JSON_COMPACT | JSON_ENCODE_ANY);
        fail_msg("%s is not %s", text ? text : "nothing", wanted_text);
    }
}

void assert_json(const json_t *json, const char *expected)
{
    json_t *wanted = parse("%s", expected);
    assert_equal(json, wanted);
    json_decref(wanted);
}

void assert_members(const json_t *object, const char *expected)
{
    json_t *wanted = parse("%s", expected);
    const char *member = NULL;
    const json_t *value = NULL;
    json_object_foreach(wanted, member, value)
    {
        assert_equal(json_object_get(object, member), value);
    }
    json_decref(wanted);
}

void assert_error(const json_t *error, int code, const char *field)
{
    const char *blamed =
        json_string_value(json_object_get(json_object_get(error, "data"), "field"));
    const char *message = string(error, "message");
    if (whole(error, "code") != code || strcmp(blamed ? blamed : "", field) != 0) {
        fail_msg("%d %s expected, not %d %s: %s", code, field, (int)whole(error, "code"),
                 blamed ? blamed : "", message);
    }
    assert_true(strlen(message) > 10 && message[strlen(message) - 1] == '.');
}
