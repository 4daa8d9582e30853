#include "client/filed_line.h"

#include <jansson.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "client/json_memory.h"

void filed_line_deinit(struct filed_line *line)
{
    for (size_t i = 0; i < line->count; i++) {
        free(line->requests[i].params);
    }
    free(line->requests);
    *line = (struct filed_line){0};
}

__attribute__((format(printf, 2, 3))) static enum filed_line_found
refuse(char reason[FILED_LINE_REASON_BYTES], const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    (void)vsnprintf(reason, FILED_LINE_REASON_BYTES, format, arguments); /* a long one is cut */
    va_end(arguments);
    return FILED_LINE_BAD;
}

/* Adds a request, whose params (NULL: no memory) are taken; there is room. */
static enum filed_line_found add_take(struct filed_line *line, const char *method, char *params)
{
    if (!params) {
        return FILED_LINE_NO_MEMORY;
    }
    line->requests[line->count++] =
        (struct filed_request){.method = method, .params = params, .length = strlen(params)};
    return FILED_LINE_GOOD;
}

/* --- the calls of `then` ---------------------------------------------------------------------- */

/* The literal of a method that may stand there; NULL where it may not. */
static const char *find_method(const char *name)
{
    static const char *const METHODS[] = {"item.file", "item.rule", "item.check"};
    for (size_t i = 0; name && i < sizeof METHODS / sizeof METHODS[0]; i++) {
        if (strcmp(name, METHODS[i]) == 0) {
            return METHODS[i];
        }
    }
    return NULL;
}

static enum filed_line_found check_call(const json_t *call, size_t at,
                                        char reason[FILED_LINE_REASON_BYTES])
{
    const json_t *params = json_object_get(call, "params");
    if (!json_is_object(call) || json_object_size(call) != 2 || !json_object_get(call, "method") ||
        !params) {
        return refuse(reason, "then[%zu] is not an object of method and params alone", at);
    }
    if (!find_method(json_string_value(json_object_get(call, "method")))) {
        return refuse(reason,
                      "then[%zu] is of none of the methods item.file, item.rule and "
                      "item.check",
                      at);
    }
    if (!json_is_object(params)) {
        return refuse(reason, "the params of then[%zu] are not an object", at);
    }
    if (json_object_get(params, "id")) {
        return refuse(reason, "the params of then[%zu] have an id: they are about the line's item",
                      at);
    }
    return FILED_LINE_GOOD;
}

/* `id` may be NULL: the daemon says so. */
static enum filed_line_found add_call(struct filed_line *line, const json_t *call, json_t *id)
{
    const char *method = find_method(json_string_value(json_object_get(call, "method")));
    json_t *params = json_copy(json_object_get(call, "params"));
    if (!params || (id && json_object_set(params, "id", id))) {
        json_decref(params);
        return FILED_LINE_NO_MEMORY;
    }
    char *text = json_memory_text(params);
    json_decref(params);
    return add_take(line, method, text);
}

static enum filed_line_found add_calls(struct filed_line *line, const json_t *then, json_t *id,
                                       char reason[FILED_LINE_REASON_BYTES])
{
    enum filed_line_found found = FILED_LINE_GOOD;
    for (size_t i = 0; i < json_array_size(then) && found == FILED_LINE_GOOD; i++) {
        const json_t *call = json_array_get(then, i);
        found = check_call(call, i, reason);
        if (found == FILED_LINE_GOOD) {
            found = add_call(line, call, id);
        }
    }
    return found;
}

/* --- the line --------------------------------------------------------------------------------- */

/* The item without `then`; as it stands where it has none. */
static char *own_params(json_t *item, const char *text, size_t length)
{
    if (!json_object_get(item, "then")) {
        return strndup(text, length);
    }
    (void)json_object_del(item, "then"); /* it is there */
    return json_memory_text(item);
}

static enum filed_line_found read_item(json_t *item, const char *text, size_t length,
                                       struct filed_line *line,
                                       char reason[FILED_LINE_REASON_BYTES])
{
    json_t *then = json_incref(json_object_get(item, "then"));
    enum filed_line_found found = FILED_LINE_GOOD;
    if (then && !json_is_array(then)) {
        found = refuse(reason, "then is not a list");
    } else {
        line->requests = calloc(1 + json_array_size(then), sizeof *line->requests);
        found = line->requests ? add_take(line, "item.file", own_params(item, text, length))
                               : FILED_LINE_NO_MEMORY;
    }
    if (found == FILED_LINE_GOOD) {
        found = add_calls(line, then, json_object_get(item, "id"), reason);
    }
    json_decref(then);
    return found;
}

enum filed_line_found filed_line_read(const char *text, size_t length, struct filed_line *ret_line,
                                      char reason[FILED_LINE_REASON_BYTES])
{
    json_error_t error;
    struct filed_line line = {0};
    enum filed_line_found found = FILED_LINE_BAD;
    json_t *item = json_memory_read(text, length, JSON_REJECT_DUPLICATES | JSON_DECODE_ANY, &error);
    if (!item) {
        found = refuse(reason, "this is not JSON: %s (byte %d)", error.text, error.position);
    } else if (!json_is_object(item)) {
        found = refuse(reason, "an item is a JSON object");
    } else {
        found = read_item(item, text, length, &line, reason);
    }
    json_decref(item);
    if (json_memory_is_short()) {
        found = FILED_LINE_NO_MEMORY; /* the line is not to blame, and a request may lack a part */
    }
    if (found != FILED_LINE_GOOD) {
        filed_line_deinit(&line);
    }
    *ret_line = line;
    return found;
}
