#include "daemon/answer.h"

#include <math.h>

static void give_up(json_t **whole)
{
    json_decref(*whole);
    *whole = NULL;
}

void answer_add(json_t **object, const char *name, json_t *value)
{
    if (!*object) {
        json_decref(value);
    } else if (json_object_set_new(*object, name, value) < 0) {
        give_up(object);
    }
}

void answer_append(json_t **array, json_t *value)
{
    if (!*array) {
        json_decref(value);
    } else if (json_array_append_new(*array, value) < 0) {
        give_up(array);
    }
}

json_t *answer_number(double value)
{
    return isfinite(value) ? json_real(value) : json_null();
}

json_t *answer_count(uint64_t count)
{
    return json_integer((json_int_t)count);
}
