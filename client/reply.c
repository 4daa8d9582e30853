#include "client/reply.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "client/command.h"

enum {
    PATH_BYTES = 256
};

static bool is_kind(const json_t *value, enum reply_kind kind)
{
    switch (kind) {
    case REPLY_TEXT:
        return json_is_string(value);
    case REPLY_NUMBER:
        return json_is_number(value);
    case REPLY_TRUTH:
        return json_is_boolean(value);
    case REPLY_OBJECT:
        return json_is_object(value);
    case REPLY_OBJECTS:
    case REPLY_TEXTS:
    case REPLY_LIST:
        break;
    }
    return json_is_array(value);
}

static const char *kind_name(enum reply_kind kind)
{
    switch (kind) {
    case REPLY_TEXT:
        return "a text";
    case REPLY_NUMBER:
        return "a number";
    case REPLY_TRUTH:
        return "true or false";
    case REPLY_OBJECT:
        return "an object";
    case REPLY_OBJECTS:
    case REPLY_TEXTS:
    case REPLY_LIST:
        break;
    }
    return "a list";
}

static int fail_kind(const char *path, enum reply_kind kind, struct failure *failure)
{
    return failure_set(failure, FAILURE_PROTOCOL,
                       "the daemon's answer is not one this client knows: %s is not %s", path,
                       kind_name(kind));
}

static int check_object(const json_t *object, const struct reply_member *shape, const char *path,
                        struct failure *failure);

/* Checks what a list holds. */
static int check_entries(const json_t *list, const struct reply_member *member, const char *path,
                         struct failure *failure)
{
    enum reply_kind kind = member->kind == REPLY_TEXTS ? REPLY_TEXT : REPLY_OBJECT;
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

static int check_member(const json_t *value, const struct reply_member *member, const char *path,
                        struct failure *failure)
{
    if (member->may_be_null && (!value || json_is_null(value))) {
        return 0;
    }
    if (!is_kind(value, member->kind)) {
        return fail_kind(path, member->kind, failure);
    }
    if (member->kind == REPLY_OBJECTS || member->kind == REPLY_TEXTS) {
        return check_entries(value, member, path, failure);
    }
    return member->inside ? check_object(value, member->inside, path, failure) : 0;
}

static int check_object(const json_t *object, const struct reply_member *shape, const char *path,
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

int reply_check(const json_t *result, const struct reply_member *shape, struct failure *failure)
{
    if (!json_is_object(result)) {
        return failure_set(failure, FAILURE_PROTOCOL,
                           "the daemon's answer is not one this client knows: it is not an object");
    }
    return check_object(result, shape, "", failure);
}

double reply_number(const json_t *object, const char *name)
{
    const json_t *value = json_object_get(object, name);
    return json_is_number(value) ? json_number_value(value) : NAN;
}

struct reply_estimate reply_estimate(const json_t *object)
{
    return (struct reply_estimate){.share = reply_number(object, "share"),
                                   .low = reply_number(object, "low"),
                                   .high = reply_number(object, "high"),
                                   .given = reply_number(object, "given"),
                                   .missing = reply_number(object, "missing"),
                                   .from = command_text(object, "from")};
}

const char *reply_source(const char *from)
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
