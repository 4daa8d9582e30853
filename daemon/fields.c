#include "daemon/fields.h"

#include <errno.h>
#include <stdio.h>
#include <stdlib.h>

#include "daemon/grow.h"
#include "daemon/pointer.h"

static int check_value(const json_t *value, const char *pointer, struct fault *fault)
{
    if (json_is_string(value) || json_is_number(value) || json_is_boolean(value)) {
        return 0;
    }
    if (!json_is_array(value)) {
        return fault_set(fault, FAULT_PARAMS, pointer,
                         "A field is a string, a number, a boolean or an array of strings.");
    }
    for (size_t i = 0; i < json_array_size(value); i++) {
        if (!json_is_string(json_array_get(value, i))) {
            char at[FAULT_FIELD_BYTES];
            pointer_to_element(at, sizeof at, pointer, i);
            return fault_set(fault, FAULT_PARAMS, at, "A field's array holds strings only.");
        }
    }
    return 0;
}

int fields_check(const json_t *fields, const char *pointer, struct fault *fault)
{
    if (!json_is_object(fields)) {
        return fault_set(fault, FAULT_PARAMS, pointer,
                         "fields is an object of strings, numbers, booleans or arrays of strings.");
    }
    const char *name = NULL;
    const json_t *value = NULL;
    json_object_foreach((json_t *)fields, name, value)
    {
        char at[FAULT_FIELD_BYTES];
        pointer_to_member(at, sizeof at, pointer, name);
        if (check_value(value, at, fault) < 0) {
            return fault->code;
        }
    }
    return 0;
}

char *fields_canonical(const json_t *fields)
{
    if (json_object_size(fields) == 0) {
        return calloc(1, 1);
    }
    return json_dumps(fields, JSON_COMPACT | JSON_SORT_KEYS);
}

void field_list_deinit(struct field_list *list)
{
    free(list->entries);
    free(list->numbers);
    *list = (struct field_list){0};
}

static int add(struct field_list *list, const char *name, const char *value)
{
    if (GROW(&list->entries, &list->capacity, list->count + 1) < 0) {
        return -ENOMEM;
    }
    list->entries[list->count++] = (struct features_field){.name = name, .value = value};
    return 0;
}

/* A number's text must not move while entries point to it, so room for all is made before. */
static size_t count_numbers(const json_t *fields)
{
    size_t count = 0;
    const char *name = NULL;
    const json_t *value = NULL;
    json_object_foreach((json_t *)fields, name, value)
    {
        count += json_is_number(value);
    }
    return count;
}

static int add_value(struct field_list *list, const char *name, const json_t *value,
                     size_t *number_count)
{
    if (json_is_string(value)) {
        return add(list, name, json_string_value(value));
    }
    if (json_is_boolean(value)) {
        return add(list, name, json_is_true(value) ? "true" : "false");
    }
    if (json_is_number(value)) {
        char *text = list->numbers[(*number_count)++];
        if (json_is_integer(value)) {
            (void)snprintf(text, sizeof list->numbers[0], "%lld",
                           (long long)json_integer_value(value));
        } else {
            (void)snprintf(text, sizeof list->numbers[0], "%.17g", json_real_value(value));
        }
        return add(list, name, text);
    }
    for (size_t i = 0; i < json_array_size(value); i++) {
        if (add(list, name, json_string_value(json_array_get(value, i))) < 0) {
            return -ENOMEM;
        }
    }
    return 0;
}

int field_list_fill(struct field_list *list, const json_t *fields)
{
    size_t numbers = count_numbers(fields);
    list->count = 0;
    if (GROW(&list->numbers, &list->number_capacity, numbers) < 0) {
        return -ENOMEM;
    }
    numbers = 0;
    const char *name = NULL;
    const json_t *value = NULL;
    json_object_foreach((json_t *)fields, name, value)
    {
        if (add_value(list, name, value, &numbers) < 0) {
            return -ENOMEM;
        }
    }
    return 0;
}
