#include "daemon/snapshot/point_ranges.h"

#include <string.h>

#include "daemon/answer.h"

enum {
    POINTS_END = 0x110000,
    SURROGATES_FIRST = 0xd800,
    SURROGATES_END = 0xe000
};

/* The code point after this one. */
static int32_t next_point(int32_t point)
{
    return point + 1 == SURROGATES_FIRST ? SURROGATES_END : point + 1;
}

static void append_range(json_t **ranges, int32_t first, int32_t last)
{
    answer_append(ranges, json_pack("[i, i]", (int)first, (int)last));
}

json_t *point_ranges_json(bool (*has)(int32_t point))
{
    json_t *ranges = json_array();
    int32_t first = -1; /* of the range at hand; -1: there is none */
    int32_t last = -1;
    for (int32_t point = 0; point < POINTS_END; point = next_point(point)) {
        if (has(point)) {
            first = first < 0 ? point : first;
            last = point;
        } else if (first >= 0) {
            append_range(&ranges, first, last);
            first = -1;
        }
    }
    if (first >= 0) {
        append_range(&ranges, first, last);
    }
    return ranges;
}

/* Adds a range to those of its name. */
static void append_named(json_t **by_name, const char *name, int32_t first, int32_t last)
{
    if (!json_object_get(*by_name, name)) {
        answer_add(by_name, name, json_array());
    }
    if (!*by_name) {
        return;
    }
    json_t *range = json_pack("[i, i]", (int)first, (int)last);
    if (json_array_append_new(json_object_get(*by_name, name), range) < 0) {
        json_decref(*by_name);
        *by_name = NULL;
    }
}

json_t *point_ranges_by_name_json(const char *(*name_of)(int32_t point), const char *left_out)
{
    json_t *by_name = json_object();
    const char *name = left_out; /* of the range at hand */
    int32_t first = 0;
    int32_t last = 0;
    for (int32_t point = 0; by_name && point < POINTS_END; point = next_point(point)) {
        const char *its_name = name_of(point);
        if (strcmp(its_name, name) != 0) {
            if (strcmp(name, left_out) != 0) {
                append_named(&by_name, name, first, last);
            }
            name = its_name;
            first = point;
        }
        last = point;
    }
    if (strcmp(name, left_out) != 0) {
        append_named(&by_name, name, first, last);
    }
    return by_name;
}
