/*
 * call: one request on its way, and the table of methods that may be asked for.
 *
 * The connection side (rpc, connection) makes calls and starts them; a method keeps the call as
 * long as it needs and ends it exactly once, by call_answer_take or call_fail, at once or later,
 * always on the loop thread. The peer may be gone by then: the answer is dropped, the method need
 * not know.
 *
 * Order on one connection: reads may overlap reads, changes may follow changes into the writer's
 * queue, and a change of kind waits until all earlier calls of that connection have ended. So a
 * caller that pipelines sees its own changes, in order.
 */
#ifndef UNDERTAG_CALL_H
#define UNDERTAG_CALL_H

#include <jansson.h>
#include <stddef.h>

#include "daemon/fault.h"
#include "daemon/rights.h"

struct call;

enum method_kind {
    METHOD_READ,
    METHOD_CHANGE
};

struct method {
    const char *name; /* as on the wire: "item.file" */
    enum method_kind kind;
    enum right right; /* what a peer must be allowed */
    /* Loop thread. `params` is an object, borrowed until the call has ended. */
    void (*start)(struct call *call, const json_t *params);
};

struct method_table {
    const struct method *methods;
    size_t count;
    void *context; /* what call_context returns; belongs to the caller of server_new */
    /* Whether the peer may call the method: 0, or a code with the fault filled. NULL: everybody may
     * call everything. Loop thread. */
    int (*check)(void *context, const struct method *method, const struct rights_peer *peer,
                 struct fault *fault);
};

/* What the method table was made with. */
void *call_context(const struct call *call);

/* The user id of the peer, from the socket's credentials; RIGHTS_NO_ID where nobody knows it. */
uint32_t call_uid(const struct call *call);

/* Ends the call with a result, of which it takes the reference. NULL (no memory) ends it with
 * -32603. */
void call_answer_take(struct call *call, json_t *result);

/* The text of an answer, made on any thread, for call_answer_text_take. NULL: no memory, or nobody
 * wants an answer. The result is borrowed. */
char *call_result_text(const struct call *call, json_t *result);

/* The same of a result that is written already. */
char *call_written_text(const struct call *call, const char *result);

/* Ends the call with such a text, which it takes; NULL as call_result_text gave it. */
void call_answer_text_take(struct call *call, char *text);

/* Ends the call with an error. */
void call_fail(struct call *call, const struct fault *fault);

#endif
