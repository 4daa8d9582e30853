#include "daemon/rpc.h"

#include <stdlib.h>
#include <string.h>

#include "daemon/json_memory.h"
#include "daemon/json_text.h"

/* Whether the text nests deeper than RPC_DEPTH. Looks at brackets outside strings only, so that the
 * parser behind it never sees a text that would take it too deep. */
static bool is_too_deep(const char *line, size_t length)
{
    size_t depth = 0;
    bool in_string = false;
    for (size_t i = 0; i < length; i++) {
        char c = line[i];
        if (in_string) {
            if (c == '\\') {
                i++;
            } else if (c == '"') {
                in_string = false;
            }
        } else if (c == '"') {
            in_string = true;
        } else if (c == '[' || c == '{') {
            if (++depth > RPC_DEPTH) {
                return true;
            }
        } else if ((c == ']' || c == '}') && depth > 0) {
            depth--;
        }
    }
    return false;
}

int rpc_parse(const char *line, size_t length, json_t **ret_text, struct fault *fault)
{
    if (is_too_deep(line, length)) {
        return fault_set(fault, FAULT_PARSE, NULL,
                         "The line cannot be parsed: it nests deeper than %d levels.", RPC_DEPTH);
    }
    json_error_t error;
    (void)json_memory_was_refused(); /* before this line: somebody else's affair */
    json_t *text = json_loadb(line, length, JSON_REJECT_DUPLICATES | JSON_DECODE_ANY, &error);
    if (json_memory_was_refused()) {
        json_decref(text);
        return fault_set(fault, FAULT_INTERNAL, NULL, "There is no memory for the line.");
    }
    if (!text && json_error_code(&error) == json_error_null_character) {
        return fault_set(fault, FAULT_PARSE, NULL,
                         "The line cannot be parsed at byte %d: \\u0000 is not allowed.",
                         error.position);
    }
    if (!text) {
        return fault_set(fault, FAULT_PARSE, NULL, "The line cannot be parsed at byte %d: %s.",
                         error.position, error.text);
    }
    *ret_text = text;
    return 0;
}

static const struct method *find_method(const struct method_table *table, const char *name)
{
    for (size_t i = 0; i < table->count; i++) {
        if (strcmp(table->methods[i].name, name) == 0) {
            return &table->methods[i];
        }
    }
    return NULL;
}

static bool is_id(const json_t *id)
{
    return json_is_string(id) || json_is_number(id) || json_is_null(id);
}

/* What is wrong with the envelope itself. */
static int check_envelope(const json_t *text, struct fault *fault)
{
    if (!json_is_object(text)) {
        return fault_set(fault, FAULT_REQUEST, NULL,
                         "A request is an object with jsonrpc, method and, for an answer, id.");
    }
    const json_t *id = json_object_get(text, "id");
    if (id && !is_id(id)) {
        return fault_set(fault, FAULT_REQUEST, NULL, "id is a string, a number or null.");
    }
    const json_t *version = json_object_get(text, "jsonrpc");
    if (!json_is_string(version) || strcmp(json_string_value(version), "2.0") != 0) {
        return fault_set(fault, FAULT_REQUEST, NULL, "jsonrpc is missing or not \"2.0\".");
    }
    if (!json_is_string(json_object_get(text, "method"))) {
        return fault_set(fault, FAULT_REQUEST, NULL, "method is missing or not a string.");
    }
    const json_t *params = json_object_get(text, "params");
    if (params && !json_is_object(params) && !json_is_array(params)) {
        return fault_set(fault, FAULT_REQUEST, NULL, "params is an object.");
    }
    return 0;
}

int rpc_read(const json_t *text, const struct method_table *table, struct rpc_request *ret_request,
             struct fault *fault)
{
    json_t *id = json_object_get(text, "id");
    struct rpc_request request = {.id = id && is_id(id) ? json_incref(id) : NULL};
    json_t *params = json_object_get(text, "params");
    int code = check_envelope(text, fault);
    if (code != 0) {
        /* A malformed request is answered even without an id: nobody can say it was a
         * notification. */
        request.id = request.id ? request.id : json_null();
    } else if (json_is_array(params)) {
        code = fault_set(fault, FAULT_PARAMS, NULL, "params is an object with named members.");
    } else {
        const char *name = json_string_value(json_object_get(text, "method"));
        request.method = find_method(table, name);
        if (!request.method) {
            code = fault_set(fault, FAULT_METHOD, NULL, "There is no method '%.100s'.", name);
        } else {
            request.params = params ? json_incref(params) : json_object();
        }
        if (code == 0 && !request.params) {
            request.method = NULL;
            code = fault_set(fault, FAULT_INTERNAL, NULL, "There is no memory for the request.");
        }
    }
    *ret_request = request;
    return code;
}

void rpc_request_deinit(struct rpc_request *request)
{
    json_decref(request->id);
    json_decref(request->params);
    *request = (struct rpc_request){0};
}

/* Takes the reference to `value`. */
static char *envelope_take(json_t *id, const char *name, json_t *value)
{
    char *text = NULL;
    (void)json_memory_was_refused(); /* a value that was not to be had is NULL */
    json_t *answer = json_object();
    int code = json_object_set_new(answer, "jsonrpc", json_string("2.0"));
    code |= id ? json_object_set(answer, "id", id) : json_object_set_new(answer, "id", json_null());
    code |= json_object_set_new(answer, name, value);
    if (code == 0) {
        text = json_dumps(answer, JSON_COMPACT);
    }
    if (json_memory_was_refused()) {
        free(text); /* it may lack a part */
        text = NULL;
    }
    json_decref(answer);
    return text;
}

char *rpc_result_text(json_t *id, json_t *result)
{
    return envelope_take(id, "result", json_incref(result));
}

char *rpc_written_text(json_t *id, const char *result)
{
    struct json_text answer = {0};
    (void)json_memory_was_refused(); /* what was not to be had before is not this text */
    char *id_text = id ? json_dumps(id, JSON_COMPACT | JSON_ENCODE_ANY) : NULL;
    if (json_memory_was_refused()) {
        free(id_text); /* it may lack a part */
        return NULL;
    }
    json_text_plain(&answer, "{\"jsonrpc\":\"2.0\",\"id\":");
    json_text_plain(&answer, id_text ? id_text : "null");
    json_text_plain(&answer, ",\"result\":");
    json_text_plain(&answer, result);
    json_text_plain(&answer, "}");
    free(id_text);
    return json_text_take(&answer);
}

char *rpc_fault_text(json_t *id, const struct fault *fault)
{
    json_t *error = json_pack("{s:i, s:s}", "code", fault->code, "message", fault->message);
    if (error && fault->field[0] != '\0' &&
        json_object_set_new(error, "data", json_pack("{s:s}", "field", fault->field)) < 0) {
        json_decref(error);
        error = NULL;
    }
    return envelope_take(id, "error", error);
}
