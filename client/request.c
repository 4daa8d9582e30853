#include "client/request.h"

#include "client/command.h"

int request_new(const char *name, const char *word, const char *what, json_t **ret_params,
                struct failure *failure)
{
    json_t *string = NULL;
    int code = command_string(word, what, &string, failure);
    if (code) {
        return code;
    }
    json_t *params = json_object();
    if (json_object_set_new(params, name, string)) {
        json_decref(params);
        return failure_memory(failure);
    }
    *ret_params = params;
    return 0;
}

/* Takes the reference to `value` (NULL: no memory). */
static int set_take(json_t *params, const char *name, json_t *value, struct failure *failure)
{
    return json_object_set_new(params, name, value) ? failure_memory(failure) : 0;
}

int request_text(json_t *params, const char *name, const struct args_value *value,
                 struct failure *failure)
{
    return value->given ? set_take(params, name, json_string(value->text), failure) : 0;
}

int request_whole(json_t *params, const char *name, const struct args_value *value,
                  struct failure *failure)
{
    return value->given ? set_take(params, name, json_integer(value->whole), failure) : 0;
}

int request_number(json_t *params, const char *name, const struct args_value *value,
                   struct failure *failure)
{
    return value->given ? set_take(params, name, json_real(value->number), failure) : 0;
}

int request_list(json_t *params, const char *name, const struct args_value *value,
                 struct failure *failure)
{
    json_t *list = json_array();
    for (size_t i = 0; i < value->list_count; i++) {
        if (json_array_append_new(list, json_string(value->list[i]))) {
            json_decref(list);
            return failure_memory(failure);
        }
    }
    return set_take(params, name, list, failure);
}
