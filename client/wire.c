/*
 * Happy path: connect, queue lines into `out`, turn: write what the socket takes, read what it has
 * into `in`; wire_next takes whole lines from there and reads them as answers.
 *
 * When the daemon closes, or a write finds it gone, the connection is marked closed and what was
 * read before can still be taken: an error line that explains the end is among it. A line that is
 * not an answer of JSON-RPC 2.0 is FAILURE_PROTOCOL; the connection is of no use after that.
 */
#include "client/wire.h"

#include <assert.h>
#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/un.h>
#include <unistd.h>

#include "client/json_memory.h"
#include "daemon/lines.h"

enum {
    READ_BYTES = 64 * 1024,
    READS_A_TURN = 16, /* so that writing gets its turn too */
    ANSWER_LIMIT_BYTES = 256 * 1024 * 1024,
    ENVELOPE_BYTES = 128,          /* around params, the method's name not counted */
    SURELY_SHORT_BYTES = 64 * 1024 /* no daemon's line limit is below this */
};

struct wire {
    int fd;
    bool closed;
    int64_t next_id; /* from 1 */
    char *path;      /* for sentences */
    struct lines in;
    char *out;
    size_t out_start; /* of the first byte not yet written */
    size_t out_end;
    size_t out_capacity;
};

static int fail_connect(const char *path, int error, struct failure *failure)
{
    switch (error) {
    case ENOENT:
    case ENOTDIR:
        return failure_set(failure, FAILURE_UNREACHABLE,
                           "no daemon is reached: there is no socket %s; start undertagd, or name "
                           "its socket by --socket PATH",
                           path);
    case ECONNREFUSED:
    case ENOTSOCK:
    case EPROTOTYPE:
        return failure_set(failure, FAILURE_UNREACHABLE,
                           "no daemon is reached: nothing listens at %s; start undertagd, or name "
                           "its socket by --socket PATH",
                           path);
    case EACCES:
    case EPERM:
        return failure_set(failure, FAILURE_FORBIDDEN,
                           "this user may not use %s: it is open to its owner and group only",
                           path);
    default:
        return failure_set(failure, FAILURE_UNREACHABLE, "no daemon is reached at %s: %s", path,
                           strerror(error));
    }
}

static int connect_to(const char *path, int *ret_fd, struct failure *failure)
{
    struct sockaddr_un address = {.sun_family = AF_UNIX};
    size_t length = strlen(path);
    if (length == 0 || length >= sizeof address.sun_path) {
        return failure_set(failure, FAILURE_SETTINGS,
                           "the socket's path has %zu bytes, and 1 to %zu are possible: %s", length,
                           sizeof address.sun_path - 1, path);
    }
    memcpy(address.sun_path, path, length + 1);
    int fd = socket(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC, 0);
    if (fd < 0) {
        return failure_set(failure, FAILURE_IO, "no socket can be made: %s", strerror(errno));
    }
    int result;
    do {
        result = connect(fd, (const struct sockaddr *)&address, sizeof address);
    } while (result < 0 && errno == EINTR);
    if (result < 0) {
        int error = errno;
        (void)close(fd); /* nothing was written */
        return fail_connect(path, error, failure);
    }
    *ret_fd = fd;
    return 0;
}

int wire_open(const char *socket_path, struct wire **ret_wire, struct failure *failure)
{
    int fd = -1;
    int code = connect_to(socket_path, &fd, failure);
    return code ? code : wire_open_take(fd, socket_path, ret_wire, failure);
}

int wire_open_take(int fd, const char *socket_path, struct wire **ret_wire, struct failure *failure)
{
    struct wire *wire = calloc(1, sizeof *wire);
    char *path = strdup(socket_path);
    int flags = fcntl(fd, F_GETFL);
    if (!wire || !path) {
        (void)failure_memory(failure);
        goto fail;
    }
    if (flags < 0 || fcntl(fd, F_SETFL, flags | O_NONBLOCK) < 0) {
        (void)failure_set(failure, FAILURE_IO, "the connection to %s cannot be set up: %s",
                          socket_path, strerror(errno));
        goto fail;
    }
    wire->fd = fd;
    wire->path = path;
    wire->next_id = 1;
    lines_init(&wire->in, ANSWER_LIMIT_BYTES);
    *ret_wire = wire;
    return 0;
fail:
    (void)close(fd); /* nothing was written */
    free(path);
    free(wire);
    return failure->code;
}

void wire_free(struct wire *wire)
{
    if (!wire) {
        return;
    }
    (void)close(wire->fd); /* what was not answered is not counted as done */
    lines_deinit(&wire->in);
    free(wire->path);
    free(wire->out);
    free(wire);
}

bool wire_closed(const struct wire *wire)
{
    return wire->closed;
}

int wire_fail_closed(const struct wire *wire, struct failure *failure)
{
    return failure_set(failure, FAILURE_UNREACHABLE, "the daemon at %s closed the connection",
                       wire->path);
}

/* --- out ------------------------------------------------------------------------------------ */

static int out_room(struct wire *wire, size_t room)
{
    if (wire->out_start == wire->out_end) {
        wire->out_start = wire->out_end = 0;
    } else if (wire->out_start > wire->out_capacity / 2) {
        memmove(wire->out, wire->out + wire->out_start, wire->out_end - wire->out_start);
        wire->out_end -= wire->out_start;
        wire->out_start = 0;
    }
    if (room > SIZE_MAX / 2 || wire->out_end > SIZE_MAX / 2 - room) {
        return -1;
    }
    size_t needed = wire->out_end + room;
    if (needed > wire->out_capacity) {
        size_t capacity = needed > 2 * wire->out_capacity ? needed : 2 * wire->out_capacity;
        char *out = realloc(wire->out, capacity);
        if (!out) {
            return -1;
        }
        wire->out = out;
        wire->out_capacity = capacity;
    }
    return 0;
}

int wire_queue(struct wire *wire, const char *method, const char *params, size_t length,
               int64_t *ret_id, struct failure *failure)
{
    assert(!memchr(params, '\n', length));
    if (length > SIZE_MAX / 4 || out_room(wire, length + strlen(method) + ENVELOPE_BYTES)) {
        return failure_memory(failure);
    }
    int64_t id = wire->next_id++;
    char *end = wire->out + wire->out_end;
    int head = sprintf(end, "{\"jsonrpc\":\"2.0\",\"id\":%lld,\"method\":\"%s\",\"params\":",
                       (long long)id, method);
    assert(head > 0);
    end += head;
    memcpy(end, params, length);
    end += length;
    *end++ = '}';
    *end++ = '\n';
    wire->out_end = (size_t)(end - wire->out);
    *ret_id = id;
    return 0;
}

static int write_some(struct wire *wire, struct failure *failure)
{
    while (wire->out_start < wire->out_end && !wire->closed) {
        ssize_t written = send(wire->fd, wire->out + wire->out_start,
                               wire->out_end - wire->out_start, MSG_NOSIGNAL);
        if (written >= 0) {
            wire->out_start += (size_t)written;
        } else if (errno == EAGAIN || errno == EWOULDBLOCK) {
            break;
        } else if (errno == EPIPE || errno == ECONNRESET) {
            wire->out_start = wire->out_end; /* reading finds the end, and what was said before */
        } else if (errno != EINTR) {
            return failure_set(failure, FAILURE_IO, "writing to the daemon at %s failed: %s",
                               wire->path, strerror(errno));
        }
    }
    return 0;
}

/* --- in ------------------------------------------------------------------------------------- */

static int read_some(struct wire *wire, struct failure *failure)
{
    for (int i = 0; i < READS_A_TURN && !wire->closed; i++) {
        char *room = lines_room(&wire->in, READ_BYTES);
        if (!room) {
            return failure_memory(failure);
        }
        ssize_t count = read(wire->fd, room, READ_BYTES);
        if (count > 0) {
            lines_added(&wire->in, (size_t)count);
        } else if (count == 0 || errno == ECONNRESET) {
            wire->closed = true;
        } else if (errno == EAGAIN || errno == EWOULDBLOCK) {
            break;
        } else if (errno != EINTR) {
            return failure_set(failure, FAILURE_IO, "reading from the daemon at %s failed: %s",
                               wire->path, strerror(errno));
        }
    }
    return 0;
}

int wire_turn(struct wire *wire, struct pollfd *other, int timeout_ms, struct failure *failure)
{
    struct pollfd ready[2] = {{.fd = wire->closed ? -1 : wire->fd, .events = POLLIN}, {.fd = -1}};
    if (wire->out_start < wire->out_end) {
        ready[0].events |= POLLOUT;
    }
    if (other) {
        ready[1] = *other;
    }
    int count = poll(ready, other ? 2 : 1, timeout_ms);
    if (count < 0) {
        if (errno != EINTR) {
            return failure_set(failure, FAILURE_IO, "waiting for the daemon failed: %s",
                               strerror(errno));
        }
        ready[0].revents = ready[1].revents = 0;
    }
    if (other) {
        other->revents = ready[1].revents;
    }
    int code = 0;
    if (ready[0].revents & (POLLIN | POLLHUP | POLLERR)) {
        code = read_some(wire, failure);
    }
    if (!code && (ready[0].revents & POLLOUT)) {
        code = write_some(wire, failure);
    }
    return code;
}

/* --- answers -------------------------------------------------------------------------------- */

void wire_answer_deinit(struct wire_answer *answer)
{
    json_decref(answer->root);
    free(answer->line);
    *answer = (struct wire_answer){0};
}

/* One past the end of the JSON value that begins at `at` in a text that has been found to be JSON.
 */
static size_t skip_value(const char *text, size_t at)
{
    size_t depth = 0;
    bool quoted = false;
    for (;; at++) {
        char c = text[at];
        if (quoted) {
            if (c == '\\') {
                at++;
            } else if (c == '"') {
                quoted = false;
            }
        } else if (c == '"') {
            quoted = true;
        } else if (c == '{' || c == '[') {
            depth++;
        } else if (depth == 0 && (c == ',' || c == '}' || c == ']' || c == '\0')) {
            return at;
        } else if (c == '}' || c == ']') {
            depth--;
        }
    }
}

/* Finds the bytes of the member "result" of an object that has been found to be JSON. */
static void find_result(const char *text, const char **ret_start, size_t *ret_length)
{
    size_t at = strcspn(text, "{");
    while (text[at] == '{' || text[at] == ',') {
        at++;
        at += strspn(text + at, " \t\r");
        const char *name = text + at;
        size_t colon = at + 1;
        while (text[colon] != '"') {
            colon += text[colon] == '\\' ? 2 : 1;
        }
        colon++;
        bool found = strncmp(name, "\"result\"", strlen("\"result\"")) == 0;
        colon += strcspn(text + colon, ":") + 1;
        colon += strspn(text + colon, " \t\r");
        at = skip_value(text, colon);
        if (found) {
            size_t end = at;
            while (end > colon && strchr(" \t\r", text[end - 1])) {
                end--;
            }
            *ret_start = text + colon;
            *ret_length = end - colon;
            return;
        }
    }
}

static int fail_protocol(const struct wire *wire, const char *what, struct failure *failure)
{
    return failure_set(failure, FAILURE_PROTOCOL,
                       "what answers at %s is not an undertagd that this client knows: %s",
                       wire->path, what);
}

/* Reads the members of answer->root; what it borrows lives as long as the answer. */
static int read_members(const struct wire *wire, struct wire_answer *answer,
                        struct failure *failure)
{
    const json_t *id = json_object_get(answer->root, "id");
    const json_t *error = json_object_get(answer->root, "error");
    answer->id = json_integer_value(id); /* 0 for null; our own begin with 1 */
    answer->result = json_object_get(answer->root, "result");
    bool is_one_of_both = (error != NULL) != (answer->result != NULL);
    if (!id || (!json_is_integer(id) && !json_is_null(id)) || !is_one_of_both) {
        return fail_protocol(wire, "a line is no answer of JSON-RPC 2.0", failure);
    }
    if (answer->result) {
        find_result(answer->line, &answer->result_text, &answer->result_text_length);
        /* The line is the answer's, which frees it; the analyzer loses sight of that here. */
        // NOLINTNEXTLINE(clang-analyzer-unix.Malloc)
        return answer->result_text ? 0 : fail_protocol(wire, "a name is written oddly", failure);
    }
    answer->code = json_integer_value(json_object_get(error, "code"));
    answer->message = json_string_value(json_object_get(error, "message"));
    const json_t *data = json_object_get(error, "data");
    answer->field = json_string_value(json_object_get(data, "field"));
    answer->field = answer->field ? answer->field : "";
    if (answer->code == 0 || !answer->message) {
        return fail_protocol(wire, "an error without code or message", failure);
    }
    return 0;
}

static int read_answer(const struct wire *wire, const char *line, size_t length,
                       struct wire_answer *ret_answer, struct failure *failure)
{
    struct wire_answer answer = {0};
    json_error_t error;
    int code = 0;
    answer.root = json_memory_read(line, length, JSON_REJECT_DUPLICATES, &error);
    if (json_memory_is_short()) {
        code = failure_memory(failure); /* the answer is not to blame */
        goto fail;
    }
    if (!json_is_object(answer.root)) {
        code = fail_protocol(wire, answer.root ? "an answer is no object" : error.text, failure);
        goto fail;
    }
    answer.line = malloc(length + 1);
    if (!answer.line) {
        code = failure_memory(failure);
        goto fail;
    }
    memcpy(answer.line, line, length + 1);
    code = read_members(wire, &answer, failure);
    if (code) {
        goto fail;
    }
    *ret_answer = answer;
    return 1;
fail:
    wire_answer_deinit(&answer);
    return code;
}

int wire_next(struct wire *wire, struct wire_answer *ret_answer, struct failure *failure)
{
    for (;;) {
        char *line = NULL;
        size_t length = 0;
        size_t taken = 0;
        switch (lines_next(&wire->in, &line, &length, &taken)) {
        case LINES_NONE:
            return 0;
        case LINES_LONG:
            return fail_protocol(wire, "an answer is longer than 256 MiB", failure);
        case LINES_LINE:
            break;
        }
        if (length > 0) {
            return read_answer(wire, line, length, ret_answer, failure);
        }
    }
}

void wire_reason(const struct wire_answer *answer, char *ret_reason, size_t size)
{
    size_t length = strlen(answer->message);
    if (length > 0 && answer->message[length - 1] == '.') {
        length--;
    }
    int shown = length < size ? (int)length : (int)size - 1;
    bool named = *answer->field;
    int written = snprintf(ret_reason, size, "%.*s%s%s%s", shown, answer->message,
                           named ? " (" : "", answer->field, named ? ")" : "");
    if (written < 0) {
        ret_reason[0] = '\0';
    }
}

int wire_fail(const struct wire_answer *answer, struct failure *failure)
{
    enum failure_code code = FAILURE_DATA;
    switch (answer->code) {
    case WIRE_FORBIDDEN:
        code = FAILURE_FORBIDDEN;
        break;
    case WIRE_STORE:
    case WIRE_STOPPING:
        code = FAILURE_AGAIN;
        break;
    case WIRE_INTERNAL:
        code = FAILURE_INTERNAL;
        break;
    case WIRE_METHOD:
    case WIRE_REQUEST:
        code = FAILURE_PROTOCOL;
        break;
    case WIRE_LIMIT:
        /* Without an id and to a short request: the connections are at their limit. */
        code = answer->id == 0 ? FAILURE_AGAIN : FAILURE_DATA;
        break;
    default:
        break;
    }
    char reason[FAILURE_MESSAGE_BYTES];
    wire_reason(answer, reason, sizeof reason);
    return failure_set(failure, code, "%s", reason);
}

int wire_check(const struct wire *wire, const struct wire_answer *answer, int64_t id,
               struct failure *failure)
{
    if (answer->code != 0) {
        return wire_fail(answer, failure);
    }
    return answer->id == id ? 0 : fail_protocol(wire, "an answer that was not asked for", failure);
}

int wire_call_take(struct wire *wire, const char *method, json_t *params,
                   struct wire_answer *ret_answer, struct failure *failure)
{
    char *text = params ? json_memory_text(params) : NULL;
    size_t length = text ? strlen(text) : 0;
    int64_t id = 0;
    struct wire_answer answer = {0};
    json_decref(params);
    int code =
        text ? wire_queue(wire, method, text, length, &id, failure) : failure_memory(failure);
    free(text);
    while (!code) {
        code = wire_next(wire, &answer, failure);
        if (code == 0) {
            code = wire_closed(wire) ? wire_fail_closed(wire, failure)
                                     : wire_turn(wire, NULL, -1, failure);
        }
    }
    if (code < 0) {
        return code;
    }
    if (answer.code == WIRE_LIMIT && answer.id == 0 && length > SURELY_SHORT_BYTES) {
        answer.id = id; /* not the connections are at their limit but this line */
    }
    code = wire_check(wire, &answer, id, failure);
    if (code) {
        wire_answer_deinit(&answer);
        return code;
    }
    *ret_answer = answer;
    return 0;
}
