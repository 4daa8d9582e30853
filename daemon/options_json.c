#include "daemon/options_json.h"

#include <stdlib.h>
#include <string.h>

static json_t *option_json(const struct options_row *row)
{
    if (!row->is_number) {
        return json_string(row->value);
    }
    double number = strtod(row->value, NULL); /* our own text, in the "C" locale */
    return strpbrk(row->value, ".e") ? json_real(number) : json_integer((json_int_t)number);
}

json_t *options_json(const struct options *options, unsigned groups)
{
    json_t *object = json_object();
    for (size_t i = 0; i < options_count(); i++) {
        struct options_row row;
        options_describe(options, i, &row);
        if ((groups & OPTIONS_IN(row.group)) != 0 &&
            json_object_set_new(object, row.name, option_json(&row)) < 0) {
            json_decref(object);
            return NULL;
        }
    }
    return object;
}
