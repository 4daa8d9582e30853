#include "client/answer.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "client/command.h"

enum {
    PATH_BYTES = 256
};

static bool is_kind(const json_t *value, enum answer_kind kind)
{
    switch (kind) {
    case ANSWER_TEXT:
        return json_is_string(value);
    case ANSWER_NUMBER:
        return json_is_number(value);
    case ANSWER_TRUTH:
        return json_is_boolean(value);
    case ANSWER_OBJECT:
        return json_is_object(value);
    case ANSWER_OBJECTS:
    case ANSWER_TEXTS:
    case ANSWER_LIST:
        break;
    }
    return json_is_array(value);
}

static const char *kind_name(enum answer_kind kind)
{
    switch (kind) {
    case ANSWER_TEXT:
        return "a text";
    case ANSWER_NUMBER:
        return "a number";
    case ANSWER_TRUTH:
        return "true or false";
    case ANSWER_OBJECT:
        return "an object";
    case ANSWER_OBJECTS:
    case ANSWER_TEXTS:
    case ANSWER_LIST:
        break;
    }
    return "a list";
}

static int fail_kind(const char *path, enum answer_kind kind, struct failure *failure)
{
    return failure_set(failure, FAILURE_PROTOCOL,
                       "the daemon's answer is not one this client knows: %s is not %s", path,
                       kind_name(kind));
}

static int check_object(const json_t *object, const struct answer_member *shape, const char *path,
                        struct failure *failure);

/* Checks what a list holds. */
static int check_entries(const json_t *list, const struct answer_member *member, const char *path,
                         struct failure *failure)
{
    enum answer_kind kind = member->kind == ANSWER_TEXTS ? ANSWER_TEXT : ANSWER_OBJECT;
    size_t i;
    json_t *entry;
    json_array_foreach(list, i, entry)
    {
        char place[PATH_BYTES];
        (void)snprintf(place, sizeof place, "%.200s/%zu", path, i);
        if (!is_kind(entry, kind)) {
            return fail_kind(place, kind, failure);
        }
        int code = member->inside ? check_object(entry, member->inside, place, failure) : 0;
        if (code) {
            return code;
        }
    }
    return 0;
}

static int check_member(const json_t *value, const struct answer_member *member, const char *path,
                        struct failure *failure)
{
    if (member->may_be_null && (!value || json_is_null(value))) {
        return 0;
    }
    if (!is_kind(value, member->kind)) {
        return fail_kind(path, member->kind, failure);
    }
    if (member->kind == ANSWER_OBJECTS || member->kind == ANSWER_TEXTS) {
        return check_entries(value, member, path, failure);
    }
    return member->inside ? check_object(value, member->inside, path, failure) : 0;
}

static int check_object(const json_t *object, const struct answer_member *shape, const char *path,
                        struct failure *failure)
{
    for (; shape->name; shape++) {
        char place[PATH_BYTES];
        (void)snprintf(place, sizeof place, "%s/%s", path, shape->name); /* a long one is cut */
        int code = check_member(json_object_get(object, shape->name), shape, place, failure);
        if (code) {
            return code;
        }
    }
    return 0;
}

int answer_check(const json_t *result, const struct answer_member *shape, struct failure *failure)
{
    if (!json_is_object(result)) {
        return failure_set(failure, FAILURE_PROTOCOL,
                           "the daemon's answer is not one this client knows: it is not an object");
    }
    return check_object(result, shape, "", failure);
}

double answer_number(const json_t *object, const char *name)
{
    const json_t *value = json_object_get(object, name);
    return json_is_number(value) ? json_number_value(value) : NAN;
}

struct answer_estimate answer_estimate(const json_t *object)
{
    return (struct answer_estimate){.share = answer_number(object, "share"),
                                    .low = answer_number(object, "low"),
                                    .high = answer_number(object, "high"),
                                    .given = answer_number(object, "given"),
                                    .missing = answer_number(object, "missing"),
                                    .from = command_text(object, "from")};
}

const char *answer_source(const char *from)
{
    static const char *const SOURCES[][2] = {{"curve", "the curve of all tags"},
                                             {"checks", "spot checks"},
                                             {"both", "the curve of all tags and spot checks"}};
    for (size_t i = 0; i < sizeof SOURCES / sizeof SOURCES[0]; i++) {
        if (strcmp(from, SOURCES[i][0]) == 0) {
            return SOURCES[i][1];
        }
    }
    return from;
}
