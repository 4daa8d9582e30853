#include "daemon/call_queue.h"

#include <assert.h>
#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/grow.h"

enum {
    CALLS_MOST =
        2048, /* lines behind these wait in the connection's buffer, as do calls of a batch */
    LINE_BYTES_MOST = 1024 * 1024 /* lines behind this wait in the connection's buffer */
};

/*
 * Calls of one connection under way at a time, by kind. Changes are committed together, so many are
 * good; reads queue for a few threads, where a crowd of one connection would keep others waiting.
 * So connections that read share out what is under way together.
 */
static const size_t RUNNING_MOST[] = {[METHOD_READ] = 32, [METHOD_CHANGE] = 1024};

enum {
    READS_TOGETHER = 64
};

/* --- adding -------------------------------------------------------------------------------------
 */

static void append(struct call_queue *queue, struct call *call)
{
    if (queue->last) {
        queue->last->next = call;
    } else {
        queue->first = call;
    }
    queue->last = call;
    queue->count++;
    if (!queue->to_start && call->state == CALL_WAITING) {
        queue->to_start = call;
    }
}

/* A new call behind all others; NULL breaks the queue. */
static struct call *add_call(struct call_queue *queue)
{
    struct call *call = calloc(1, sizeof *call);
    if (!call) {
        queue->broken = true;
        return NULL;
    }
    call->queue = queue;
    return call;
}

/* The call has its answer, or nobody wants one. */
static void end_with(struct call *call, char *answer, bool wanted)
{
    struct call_queue *queue = call->queue;
    call->state = CALL_ENDED;
    call->answer = answer;
    if (wanted && !answer) {
        queue->broken = true;
    }
    if (answer) {
        call->answer_bytes = strlen(answer);
        queue->answer_bytes += call->answer_bytes;
    }
}

static void end_with_fault(struct call *call, const struct fault *fault)
{
    bool wanted = call->request.id != NULL;
    end_with(call, wanted ? rpc_fault_text(call->request.id, fault) : NULL, wanted);
}

static void refuse_stopping(struct call *call)
{
    struct fault fault = {0};
    (void)fault_set(&fault, FAULT_STOPPING, NULL,
                    "The daemon is stopping: ask again once it is back.");
    end_with_fault(call, &fault);
}

void call_queue_add_fault(struct call_queue *queue, const struct fault *fault, size_t line_bytes)
{
    struct call *call = add_call(queue);
    if (!call) {
        return;
    }
    call->line_bytes = line_bytes;
    queue->line_bytes += line_bytes;
    end_with(call, rpc_fault_text(NULL, fault), true);
    append(queue, call);
}

/* Whether the peer may call it, by what the table says now. */
static int check_right(const struct call_queue *queue, const struct method *method,
                       struct fault *fault)
{
    const struct method_table *table = queue->table;
    return table->check ? table->check(table->context, method, &queue->peer, fault) : 0;
}

static struct call *add_request(struct call_queue *queue, const json_t *text)
{
    struct fault fault = {0};
    struct call *call = add_call(queue);
    if (!call) {
        return NULL;
    }
    if (rpc_read(text, queue->table, &call->request, &fault) < 0 ||
        (!queue->stopping && check_right(queue, call->request.method, &fault) < 0)) {
        end_with_fault(call, &fault);
    } else if (queue->stopping) {
        refuse_stopping(call);
    }
    append(queue, call);
    return call;
}

static void drop_batch(struct call_queue *queue)
{
    json_decref(queue->batch);
    queue->batch = NULL;
}

/* Makes calls of the batch at hand, but only some ahead of those that have ended: a line may hold
 * millions of requests. */
static void unpack_batch(struct call_queue *queue)
{
    size_t count = json_array_size(queue->batch);
    while (call_queue_has_batch_left(queue)) {
        struct call *call = add_request(queue, json_array_get(queue->batch, queue->batch_at));
        if (!call) {
            return;
        }
        call->opens_batch = queue->batch_at == 0;
        queue->batch_at++;
        if (queue->batch_at == count) {
            call->closes_batch = true;
            call->line_bytes = queue->batch_bytes;
            drop_batch(queue);
        }
    }
}

static void take_batch(struct call_queue *queue, json_t *batch, size_t length)
{
    queue->batch = json_incref(batch);
    queue->batch_at = 0;
    queue->batch_bytes = length;
    queue->line_bytes += length;
    unpack_batch(queue);
}

static void add_one(struct call_queue *queue, const json_t *text, size_t length)
{
    struct call *call = add_request(queue, text);
    if (call) {
        call->line_bytes = length;
        queue->line_bytes += length;
    }
}

void call_queue_add_line(struct call_queue *queue, const char *line, size_t length)
{
    struct fault fault = {0};
    json_t *text = NULL;
    assert(!queue->batch); /* there is no room while one is being unpacked */
    if (rpc_parse(line, length, &text, &fault) < 0) {
        call_queue_add_fault(queue, &fault, length);
        return;
    }
    if (!json_is_array(text)) {
        add_one(queue, text, length);
    } else if (json_array_size(text) > 0) {
        take_batch(queue, text, length);
    } else {
        (void)fault_set(&fault, FAULT_REQUEST, NULL, "A batch holds one request at least.");
        call_queue_add_fault(queue, &fault, length);
    }
    json_decref(text);
}

/* --- running ------------------------------------------------------------------------------------
 */

/* Answers behind the head cannot leave before it: it may start however many of them there are. */
static bool has_answer_room(const struct call_queue *queue, const struct call *call, size_t limit)
{
    return queue->answer_bytes < limit || (call == queue->first && limit > 0);
}

static bool has_place(const struct call_queue *queue, enum method_kind kind)
{
    size_t most = RUNNING_MOST[kind];
    if (queue->running == 0) {
        return true;
    }
    if (kind == METHOD_READ && queue->crowd && queue->crowd->reading > 0) {
        size_t share = READS_TOGETHER / queue->crowd->reading;
        most = share < most ? share : most;
    }
    return queue->running_kind == kind && queue->running < most;
}

static void begin_running(struct call_queue *queue, enum method_kind kind)
{
    if (queue->crowd && queue->running == 0 && kind == METHOD_READ) {
        queue->crowd->reading++;
    }
    queue->running_kind = kind;
    queue->running++;
}

void call_queue_start(struct call_queue *queue, size_t answer_bytes_limit)
{
    if (queue->answer_bytes < answer_bytes_limit) {
        unpack_batch(queue);
    }
    while (queue->to_start && !queue->broken) {
        struct call *call = queue->to_start;
        if (!has_answer_room(queue, call, answer_bytes_limit)) {
            return;
        }
        if (call->state != CALL_WAITING) {
            queue->to_start = call->next;
            continue;
        }
        enum method_kind kind = call->request.method->kind;
        if (!has_place(queue, kind)) {
            return;
        }
        queue->to_start = call->next;
        if (queue->stopping) {
            refuse_stopping(call);
            continue;
        }
        call->state = CALL_RUNNING;
        begin_running(queue, kind);
        call->request.method->start(call, call->request.params);
    }
}

static void free_call(struct call *call)
{
    rpc_request_deinit(&call->request);
    free(call->answer);
    free(call);
}

static void remove_call(struct call_queue *queue, struct call *call)
{
    struct call **link = &queue->first;
    struct call *previous = NULL;
    while (*link != call) {
        previous = *link;
        link = &previous->next;
    }
    *link = call->next;
    if (queue->last == call) {
        queue->last = previous;
    }
    if (queue->to_start == call) {
        queue->to_start = call->next;
    }
    queue->count--;
    queue->line_bytes -= call->line_bytes;
    queue->answer_bytes -= call->answer_bytes;
    free_call(call);
}

static void end_running(struct call *call, char *answer, bool wanted)
{
    struct call_queue *queue = call->queue;
    assert(call->state == CALL_RUNNING);
    queue->running--;
    if (queue->crowd && queue->running == 0 && queue->running_kind == METHOD_READ) {
        queue->crowd->reading--;
    }
    end_with(call, answer, wanted);
    queue->ended(queue->user);
}

void *call_context(const struct call *call)
{
    return call->queue->table->context;
}

uint32_t call_uid(const struct call *call)
{
    return call->queue->peer.uid;
}

void call_answer_take(struct call *call, json_t *result)
{
    if (!result) {
        struct fault fault = {0};
        (void)fault_set(&fault, FAULT_INTERNAL, NULL, "There is no memory for the answer.");
        call_fail(call, &fault);
        return;
    }
    bool wanted = call->request.id != NULL;
    char *answer = wanted ? rpc_result_text(call->request.id, result) : NULL;
    json_decref(result);
    end_running(call, answer, wanted);
}

char *call_result_text(const struct call *call, json_t *result)
{
    return call->request.id ? rpc_result_text(call->request.id, result) : NULL;
}

char *call_written_text(const struct call *call, const char *result)
{
    return call->request.id ? rpc_written_text(call->request.id, result) : NULL;
}

void call_answer_text_take(struct call *call, char *text)
{
    end_running(call, text, call->request.id != NULL);
}

void call_fail(struct call *call, const struct fault *fault)
{
    bool wanted = call->request.id != NULL;
    end_running(call, wanted ? rpc_fault_text(call->request.id, fault) : NULL, wanted);
}

/* --- answers ------------------------------------------------------------------------------------
 */

static int put(struct call_text *text, const char *bytes, size_t size)
{
    if (GROW(&text->bytes, &text->capacity, text->size + size) < 0) {
        return -ENOMEM;
    }
    memcpy(text->bytes + text->size, bytes, size);
    text->size += size;
    return 0;
}

/* Puts what is due of the call at the head: its answer, and what holds a batch together. */
static int put_head(struct call_queue *queue, const struct call *call, struct call_text *text)
{
    int code = 0;
    bool in_batch = queue->in_batch;
    if (call->answer) {
        if (in_batch) {
            code = put(text, queue->batch_has_answers ? "," : "[", 1);
        }
        if (code == 0) {
            code = put(text, call->answer, call->answer_bytes);
        }
        queue->batch_has_answers = in_batch;
    }
    if (code == 0 && in_batch && call->closes_batch && queue->batch_has_answers) {
        queue->batch_has_answers = false;
        return put(text, "]\n", 2);
    }
    return code == 0 && !in_batch && call->answer ? put(text, "\n", 1) : code;
}

int call_queue_collect(struct call_queue *queue, struct call_text *text)
{
    while (queue->first && queue->first->state == CALL_ENDED) {
        struct call *call = queue->first;
        queue->in_batch = queue->in_batch || call->opens_batch;
        int code = put_head(queue, call, text);
        if (code < 0) {
            return code;
        }
        if (call->closes_batch) {
            queue->in_batch = false;
        }
        remove_call(queue, call);
    }
    return 0;
}

bool call_queue_has_room(const struct call_queue *queue)
{
    return queue->line_bytes < LINE_BYTES_MOST && queue->count < CALLS_MOST && !queue->batch;
}

bool call_queue_has_batch_left(const struct call_queue *queue)
{
    return queue->batch && queue->count < CALLS_MOST;
}

bool call_queue_is_empty(const struct call_queue *queue)
{
    return queue->first == NULL && !queue->batch;
}

void call_queue_abandon(struct call_queue *queue)
{
    if (queue->batch) {
        queue->line_bytes -= queue->batch_bytes;
        drop_batch(queue);
    }
    struct call *call = queue->first;
    while (call) {
        struct call *next = call->next;
        if (call->state != CALL_RUNNING) {
            remove_call(queue, call);
        }
        call = next;
    }
}
