/*
 * wire: one connection to the daemon: requests out, answers in, in the order of the requests.
 *
 * Requests are queued and go out as the socket takes them, while answers are read: a caller that
 * pipelines never stands still against a daemon that waits to be read. One thread; no signals.
 */
#ifndef UNDERTAG_CLIENT_WIRE_H
#define UNDERTAG_CLIENT_WIRE_H

#include <jansson.h>
#include <poll.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "client/failure.h"

/* The codes of the wire contract that a client tells apart. */
enum wire_code {
    WIRE_REQUEST = -32600,
    WIRE_METHOD = -32601,
    WIRE_PARAMS = -32602,
    WIRE_INTERNAL = -32603,
    WIRE_NOT_FOUND = -32001,
    WIRE_VOCABULARY = -32002,
    WIRE_LIMIT = -32003,
    WIRE_FORBIDDEN = -32004,
    WIRE_STORE = -32005,
    WIRE_STOPPING = -32006
};

struct wire;

struct wire_answer {
    int64_t id;              /* 0 where it is null: the line could not be read by the daemon */
    int64_t code;            /* 0 with a result, otherwise the error's */
    const char *message;     /* of the error, for people; clean it before it is shown */
    const char *field;       /* a JSON Pointer into params, or "" */
    const json_t *result;    /* NULL with an error */
    const char *result_text; /* the very bytes that the daemon sent, NULL with an error */
    size_t result_text_length;
    json_t *root; /* private, as is the next */
    char *line;
};

void wire_answer_deinit(struct wire_answer *answer); /* all zero is passed over */

/* Connects (waiting until the daemon accepts). The path is copied. */
int wire_open(const char *socket_path, struct wire **ret_wire, struct failure *failure)
    __attribute__((warn_unused_result));

/* The same over a connected stream socket, which it takes, also on failure. */
int wire_open_take(int fd, const char *socket_path, struct wire **ret_wire, struct failure *failure)
    __attribute__((warn_unused_result));
void wire_free(struct wire *wire); /* NULL is passed over */

/* Queues a request; `params` is one JSON text of `length` bytes without a line end. Each id is the
 * last one and 1. */
int wire_queue(struct wire *wire, const char *method, const char *params, size_t length,
               int64_t *ret_id, struct failure *failure) __attribute__((warn_unused_result));

/*
 * Waits until something can be written or read, or `other` (may be NULL) is ready, or `timeout_ms`
 * (-1: none) has passed; writes and reads what there is.
 */
int wire_turn(struct wire *wire, struct pollfd *other, int timeout_ms, struct failure *failure)
    __attribute__((warn_unused_result));

/* Takes the next answer that has come: 1, or 0 if there is none, or a failure's code. */
int wire_next(struct wire *wire, struct wire_answer *ret_answer, struct failure *failure)
    __attribute__((warn_unused_result));

/* True once the daemon has closed the connection; answers read before may still be taken. */
bool wire_closed(const struct wire *wire);

/*
 * Asks one thing and waits for the answer, which holds a result: an error becomes the failure that
 * wire_fail gives. Takes the reference to `params` (NULL: no memory). Nothing else may be under
 * way.
 */
int wire_call_take(struct wire *wire, const char *method, json_t *params,
                   struct wire_answer *ret_answer, struct failure *failure)
    __attribute__((warn_unused_result));

/*
 * Why the request was refused, for people: the daemon's sentence without its full stop, and the
 * member to blame. Cut to `size` bytes, the NUL included.
 */
void wire_reason(const struct wire_answer *answer, char *ret_reason, size_t size);

/* The failure that an error answer stands for. */
int wire_fail(const struct wire_answer *answer, struct failure *failure);

/* 0 where the answer holds the result that the request `id` asked for. Nothing else may be under
 * way. */
int wire_check(const struct wire *wire, const struct wire_answer *answer, int64_t id,
               struct failure *failure) __attribute__((warn_unused_result));

/* The failure for a connection that is gone. */
int wire_fail_closed(const struct wire *wire, struct failure *failure);

#endif
