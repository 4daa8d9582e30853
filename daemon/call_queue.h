/*
 * call_queue: the calls of one connection, in the order in which they came, from the line to the
 * answer. No sockets: lines in, text of answers out.
 *
 * Reads may overlap reads, changes may follow changes, and a change of kind waits until every
 * earlier call has ended. Answers come out in the order of the calls; those of a batch as one line.
 */
#ifndef UNDERTAG_CALL_QUEUE_H
#define UNDERTAG_CALL_QUEUE_H

#include <stdbool.h>
#include <stddef.h>

#include "daemon/call.h"
#include "daemon/rpc.h"

enum call_state {
    CALL_WAITING,
    CALL_RUNNING,
    CALL_ENDED
};

struct call {
    struct call_queue *queue;
    struct call *next;
    struct rpc_request request;
    enum call_state state;
    bool opens_batch;
    bool closes_batch;
    char *answer; /* NULL while there is none, and for good where nobody asked for one */
    size_t answer_bytes;
    size_t line_bytes; /* of the line that ends with this call; 0 for the others of a batch */
};

/* What the queues of one server share. Zero-initialised is empty. */
struct call_crowd {
    size_t reading; /* queues with reads under way */
};

enum {
    CALL_QUEUE_CALL_BYTES = 1024 /* about what a call takes until it has an answer */
};

/* Set the first four members, leave the rest zero. Private but for what the comments say. */
struct call_queue {
    const struct method_table *table;
    void *user;
    void (*ended)(void *user); /* a call has ended, perhaps while call_queue_start runs */
    struct call_crowd *crowd;  /* borrowed for the queue's life; NULL: there is nobody else */
    struct rights_peer peer;   /* likewise */
    bool stopping;             /* refuse what has not started with -32006 */
    bool broken; /* out of memory: the order of answers cannot be kept; close the connection */

    struct call *first;
    struct call *last;
    struct call *to_start; /* the first that waits; NULL: none */
    size_t count;
    json_t *batch; /* the one whose calls are being made; NULL: none */
    size_t batch_at;
    size_t batch_bytes;
    size_t running;
    enum method_kind running_kind; /* where any runs */
    size_t line_bytes;             /* of lines with calls in the queue */
    size_t answer_bytes;           /* of answers not collected yet */
    bool in_batch;                 /* the head is within a batch */
    bool batch_has_answers;        /* which has given one out */
};

/* Bytes of text that grow as needed. Zero-initialised is empty. */
struct call_text {
    char *bytes;
    size_t size;
    size_t capacity;
};

/* Adds the calls of a line. */
void call_queue_add_line(struct call_queue *queue, const char *line, size_t length);

/* Adds an answer to what was no request at all, in its place. */
void call_queue_add_fault(struct call_queue *queue, const struct fault *fault, size_t line_bytes);

/* Starts what may start; stops early once `answer_bytes_limit` bytes of answers wait. */
void call_queue_start(struct call_queue *queue, size_t answer_bytes_limit);

/* Moves the answers that are due, in order, behind `text`. Returns 0 or -ENOMEM. */
int call_queue_collect(struct call_queue *queue, struct call_text *text)
    __attribute__((warn_unused_result));

/* Whether there is room for another line. */
bool call_queue_has_room(const struct call_queue *queue);

/* Whether call_queue_start would make more calls of a batch, answers permitting. */
bool call_queue_has_batch_left(const struct call_queue *queue);

bool call_queue_is_empty(const struct call_queue *queue);

/* Forgets every call that does not run. What runs ends unheard. */
void call_queue_abandon(struct call_queue *queue);

#endif
