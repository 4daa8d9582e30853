/*
 * Happy path: bytes come (on_read), are cut into lines, become calls in the queue; calls end, their
 * answers are collected in order into `filling` and written from `writing`, one write at a time.
 * After anything that happens, pump() takes everything as far as it goes, and settle() decides
 * whether to read on and whether all is over.
 *
 * Failure paths: a peer that has closed its sending side still gets its answers. A failed read or
 * write, or no memory, closes the connection: waiting calls are dropped, running ones end unheard,
 * and only after the last of them is the memory freed.
 */
#include "daemon/connection.h"

#include <assert.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/call_queue.h"
#include "daemon/lines.h"
#include "daemon/peer_identity.h"

enum {
    READ_BYTES = 64 * 1024,
    IDLE_BUFFER_BYTES = 256 * 1024 /* a larger buffer is given back once it is empty */
};

struct connection {
    struct connection_settings settings;
    struct connection_links links;
    uv_pipe_t handle;
    uv_write_t write;
    struct lines lines;
    struct call_queue calls;
    struct call_text filling;
    struct call_text writing; /* size 0: no write under way */
    size_t held_bytes;        /* as counted in the room */
    uint64_t begun_ms;        /* the line that is not whole yet; 0: there is none */
    uint64_t heard_ms;        /* when anything was last read */
    uint64_t moved_ms;        /* when anything was last written, or began to be */
    bool reading;
    bool draining; /* reads no more, on our side's will or the peer's */
    bool pumping;
    bool pump_again;
    bool closing;
    bool closed;
};

static void pump(struct connection *connection);

/* --- the end ------------------------------------------------------------------------------------
 */

static void hold(struct connection *connection, size_t bytes)
{
    struct connection_room *room = connection->settings.room;
    room->held_bytes += bytes - connection->held_bytes;
    connection->held_bytes = bytes;
}

static void free_when_over(struct connection *connection)
{
    if (!connection->closed || connection->calls.running > 0 || connection->pumping) {
        return;
    }
    call_queue_abandon(&connection->calls);
    lines_deinit(&connection->lines);
    free(connection->filling.bytes);
    free(connection->writing.bytes);
    peer_identity_deinit(&connection->calls.peer);
    if (connection->settings.gone) {
        hold(connection, 0);
        connection->settings.room->connections--;
        connection->settings.gone(connection->settings.user, connection);
    }
    free(connection);
}

static void on_closed(uv_handle_t *handle)
{
    struct connection *connection = handle->data;
    connection->closed = true;
    free_when_over(connection);
}

void connection_close(struct connection *connection)
{
    if (connection->closing) {
        return;
    }
    connection->closing = true;
    call_queue_abandon(&connection->calls);
    uv_close((uv_handle_t *)&connection->handle, on_closed);
}

/* --- writing ------------------------------------------------------------------------------------
 */

static size_t unread_bytes(const struct connection *connection)
{
    return connection->filling.size + connection->writing.size + connection->calls.answer_bytes;
}

static void on_written(uv_write_t *write, int status)
{
    struct connection *connection = write->data;
    connection->writing.size = 0;
    connection->moved_ms = uv_now(connection->settings.loop);
    if (connection->closing) {
        return;
    }
    if (status < 0) {
        connection_close(connection);
        return;
    }
    pump(connection);
}

static void shrink_when_empty(struct call_text *text)
{
    if (text->size == 0 && text->capacity > IDLE_BUFFER_BYTES) {
        free(text->bytes);
        *text = (struct call_text){0};
    }
}

static void write_more(struct connection *connection)
{
    if (connection->writing.size > 0 || connection->closing) {
        return;
    }
    shrink_when_empty(&connection->writing);
    if (connection->filling.size == 0) {
        return;
    }
    struct call_text text = connection->filling;
    connection->filling = connection->writing;
    connection->writing = text;
    connection->write.data = connection;
    connection->moved_ms = uv_now(connection->settings.loop);
    const uv_buf_t buffer = {.base = text.bytes, .len = text.size};
    if (uv_write(&connection->write, (uv_stream_t *)&connection->handle, &buffer, 1, on_written) <
        0) {
        connection->writing.size = 0;
        connection_close(connection);
    }
}

/* --- reading ------------------------------------------------------------------------------------
 */

static void refuse_long_line(struct connection *connection, size_t bytes)
{
    struct fault fault = {0};
    (void)fault_set(&fault, FAULT_LIMIT, NULL,
                    "The line is longer than line_limit (%zu bytes) and was passed over.",
                    connection->settings.line_limit_bytes);
    call_queue_add_fault(&connection->calls, &fault, bytes);
}

/* Of a line that has begun, the moment stays until it ends. */
static void mark_beginning(struct connection *connection)
{
    if (!lines_is_within(&connection->lines)) {
        connection->begun_ms = 0;
    } else if (connection->begun_ms == 0) {
        connection->begun_ms = connection->heard_ms;
    }
}

/* Returns whether it stopped for want of room, with lines left perhaps. */
static bool take_lines(struct connection *connection)
{
    char *line = NULL;
    size_t length = 0;
    size_t taken = 0;
    while (call_queue_has_room(&connection->calls) && !connection->calls.broken) {
        enum lines_found found = lines_next(&connection->lines, &line, &length, &taken);
        if (found == LINES_NONE) {
            mark_beginning(connection);
            return false;
        }
        connection->begun_ms = 0;
        if (found == LINES_LONG) {
            refuse_long_line(connection, 1);
        } else if (length > 0) {
            call_queue_add_line(&connection->calls, line, length);
        }
    }
    return true;
}

static void on_alloc(uv_handle_t *handle, size_t suggested, uv_buf_t *buffer)
{
    (void)suggested; /* it knows nothing of us */
    struct connection *connection = handle->data;
    lines_shrink(&connection->lines, IDLE_BUFFER_BYTES);
    char *room = lines_room(&connection->lines, READ_BYTES);
    *buffer = (uv_buf_t){.base = room, .len = room ? READ_BYTES : 0};
}

static void stop_reading(struct connection *connection)
{
    if (connection->reading) {
        connection->reading = false;
        (void)uv_read_stop((uv_stream_t *)&connection->handle); /* always 0 */
    }
}

static void on_read(uv_stream_t *stream, ssize_t count, const uv_buf_t *buffer)
{
    (void)buffer; /* it lies in our own lines */
    struct connection *connection = stream->data;
    if (connection->closing || count == 0) {
        return;
    }
    if (count == UV_EOF) {
        connection->draining = true;
    } else if (count < 0) {
        connection_close(connection);
        return;
    } else {
        connection->heard_ms = uv_now(connection->settings.loop);
        lines_added(&connection->lines, (size_t)count);
    }
    pump(connection);
}

static bool wants_to_read(const struct connection *connection)
{
    return !connection->draining && !connection->closing &&
           unread_bytes(connection) < connection->settings.unread_limit_bytes &&
           call_queue_has_room(&connection->calls);
}

/* --- what a peer may keep -----------------------------------------------------------------------
 */

static void refuse(struct connection *connection, const struct fault *fault)
{
    connection->draining = true;
    call_queue_add_fault(&connection->calls, fault, 0);
}

/* A share is never less than what reading anything takes. Calls are counted, but it is what a peer
 * does not send to its end, or does not read, that it is blamed for: calls end by themselves. */
static void check_room(struct connection *connection)
{
    const struct connection_room *room = connection->settings.room;
    size_t kept = lines_bytes(&connection->lines) + connection->filling.capacity +
                  connection->writing.capacity + connection->calls.answer_bytes;
    hold(connection, kept + connection->calls.count * CALL_QUEUE_CALL_BYTES);
    size_t share = room->limit_bytes / room->connections;
    if (room->held_bytes <= room->limit_bytes || kept <= share || kept <= IDLE_BUFFER_BYTES ||
        connection->draining) {
        return;
    }
    struct fault fault = {0};
    (void)fault_set(&fault, FAULT_LIMIT, NULL,
                    "All connections together hold more than wire_limit (%zu bytes), and this one "
                    "more than its share: send shorter lines, read answers sooner, and try again "
                    "later.",
                    room->limit_bytes);
    refuse(connection, &fault);
    connection->pump_again = true;
}

uint64_t connection_quiet_ms(const struct connection *connection)
{
    bool waits = connection->closing || connection->begun_ms > 0 || unread_bytes(connection) > 0 ||
                 !call_queue_is_empty(&connection->calls);
    return waits ? 0 : uv_now(connection->settings.loop) - connection->heard_ms;
}

void connection_check(struct connection *connection, const struct connection_patience *patience)
{
    uint64_t now_ms = uv_now(connection->settings.loop);
    bool reads_nothing =
        connection->writing.size > 0 && now_ms - connection->moved_ms > patience->stalled_ms;
    bool asks_nothing =
        patience->quiet_ms > 0 && connection_quiet_ms(connection) > patience->quiet_ms;
    if (reads_nothing || asks_nothing) {
        connection_close(connection);
    } else if (connection->begun_ms > 0 && !connection->draining && !connection->closing &&
               now_ms - connection->begun_ms > patience->stalled_ms) {
        struct fault fault = {0};
        (void)fault_set(&fault, FAULT_LIMIT, NULL,
                        "A line was begun and did not end within stalled_ms (%llu).",
                        (unsigned long long)patience->stalled_ms);
        connection_refuse(connection, &fault);
    }
}

/* --- taking it all as far as it goes ------------------------------------------------------------
 */

static void settle(struct connection *connection)
{
    if (!wants_to_read(connection)) {
        stop_reading(connection);
    } else if (!connection->reading) {
        int code = uv_read_start((uv_stream_t *)&connection->handle, on_alloc, on_read);
        connection->reading = code == 0;
        if (code < 0) {
            connection_close(connection);
        }
    }
    if (connection->draining && call_queue_is_empty(&connection->calls) &&
        unread_bytes(connection) == 0) {
        connection_close(connection);
    }
}

/* Closes the connection where it fails. */
static int collect(struct connection *connection)
{
    if (connection->calls.broken ||
        call_queue_collect(&connection->calls, &connection->filling) < 0) {
        connection_close(connection);
        return -1;
    }
    return 0;
}

static void pump_once(struct connection *connection)
{
    size_t limit = connection->settings.unread_limit_bytes;
    bool has_left_lines = take_lines(connection);
    if (collect(connection) < 0) {
        return;
    }
    size_t unread = connection->filling.size + connection->writing.size;
    call_queue_start(&connection->calls, limit > unread ? limit - unread : 0);
    if (collect(connection) < 0) {
        return;
    }
    write_more(connection);
    /* What is refused at once makes room, and nothing that would bring us back. */
    bool has_room = has_left_lines && call_queue_has_room(&connection->calls);
    if ((has_room || call_queue_has_batch_left(&connection->calls)) &&
        unread_bytes(connection) < limit) {
        connection->pump_again = true;
    }
}

/* Calls may end, and writes complete, while calls are started: that only asks for another round. */
static void pump(struct connection *connection)
{
    connection->pump_again = true;
    if (connection->pumping) {
        return;
    }
    connection->pumping = true;
    while (connection->pump_again && !connection->closing) {
        connection->pump_again = false;
        pump_once(connection);
        if (!connection->closing) {
            check_room(connection);
        }
    }
    if (!connection->closing) {
        settle(connection);
    }
    connection->pumping = false;
}

static void on_call_ended(void *user)
{
    struct connection *connection = user;
    if (connection->closing) {
        call_queue_abandon(&connection->calls);
        free_when_over(connection);
        return;
    }
    pump(connection);
}

/* --- life ---------------------------------------------------------------------------------------
 */

static int read_peer(uv_pipe_t *handle, struct rights_peer *peer)
{
    uv_os_fd_t fd = -1; /* which nobody is behind */
    (void)uv_fileno((uv_handle_t *)handle, &fd);
    return peer_identity_read(fd, peer);
}

int connection_accept(const struct connection_settings *settings, uv_stream_t *listener,
                      struct connection **ret_connection)
{
    struct connection *connection = calloc(1, sizeof *connection);
    if (!connection) {
        return UV_ENOMEM;
    }
    connection->settings = *settings;
    int code = uv_pipe_init(settings->loop, &connection->handle, 0);
    if (code < 0) {
        free(connection);
        return code;
    }
    connection->handle.data = connection;
    connection->heard_ms = uv_now(settings->loop);
    code = uv_accept(listener, (uv_stream_t *)&connection->handle);
    if (code < 0) {
        connection->settings.gone = NULL; /* the owner never knew it */
        connection_close(connection);
        return code;
    }
    lines_init(&connection->lines, settings->line_limit_bytes);
    connection->calls = (struct call_queue){.table = settings->table,
                                            .user = connection,
                                            .ended = on_call_ended,
                                            .crowd = &settings->room->crowd};
    if (read_peer(&connection->handle, &connection->calls.peer) < 0) {
        connection->settings.gone = NULL;
        connection_close(connection);
        return UV_ENOMEM;
    }
    settings->room->connections++;
    *ret_connection = connection;
    return 0;
}

void connection_start(struct connection *connection)
{
    pump(connection);
}

void connection_refuse(struct connection *connection, const struct fault *fault)
{
    refuse(connection, fault);
    pump(connection);
}

void connection_drain(struct connection *connection)
{
    connection->draining = true;
    connection->calls.stopping = true;
    pump(connection);
}

struct connection_links *connection_links(struct connection *connection)
{
    return &connection->links;
}
