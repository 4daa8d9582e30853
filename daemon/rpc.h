/*
 * rpc: the envelopes of JSON-RPC 2.0 (the specification of 2013, sections 4 to 6): one line into
 * requests, an outcome into the text of an answer. No I/O and no state.
 */
#ifndef UNDERTAG_RPC_H
#define UNDERTAG_RPC_H

#include <jansson.h>
#include <stddef.h>

#include "daemon/call.h"
#include "daemon/fault.h"

enum {
    RPC_DEPTH = 64 /* arrays and objects within each other; a deeper text is not parsed */
};

/*
 * Parses a line: any one JSON text (RFC 8259) without a duplicate key. On failure returns
 * FAULT_PARSE with the fault filled.
 */
int rpc_parse(const char *line, size_t length, json_t **ret_text, struct fault *fault)
    __attribute__((warn_unused_result));

/* One request. `id` and `params` are references of its own. */
struct rpc_request {
    const struct method *method; /* NULL where the request cannot be started */
    json_t *id;                  /* NULL for a notification */
    json_t *params;              /* an object */
};

/*
 * Reads one request of a line. Where it cannot be started, returns the fault's code: the answer
 * then goes to ret_request->id, which is null where it cannot be told, and NULL for a notification,
 * which is never answered.
 */
int rpc_read(const json_t *text, const struct method_table *table, struct rpc_request *ret_request,
             struct fault *fault) __attribute__((warn_unused_result));

void rpc_request_deinit(struct rpc_request *request);

/* The text of an answer, without a line end, for free(); NULL: no memory. `id` NULL is null. */
char *rpc_result_text(json_t *id, json_t *result);

/* The same of a result that is written already. */
char *rpc_written_text(json_t *id, const char *result);

char *rpc_fault_text(json_t *id, const struct fault *fault);

#endif
