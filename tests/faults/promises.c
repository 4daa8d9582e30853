#include "tests/faults/promises.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum {
    INTERNAL = -32603,
    STORE = -32005,
    NOT_THERE = -32001,
    STOPPING = -32006
};

void promises_deinit(struct promises *promises)
{
    free(promises->entries);
    *promises = (struct promises){0};
}

void promises_note(struct promises *promises, const char *id, const char *before, const char *after,
                   enum outcome outcome)
{
    if (promises->count == promises->capacity) {
        promises->capacity = 2 * promises->capacity + 64;
        promises->entries =
            realloc(promises->entries, promises->capacity * sizeof promises->entries[0]);
        assert_non_null(promises->entries);
    }
    struct promise *entry = &promises->entries[promises->count++];
    *entry = (struct promise){.before = before, .after = after, .outcome = outcome};
    (void)snprintf(entry->id, sizeof entry->id, "%s", id);
}

enum outcome outcome_take(json_t *answer, bool hangs)
{
    enum outcome outcome = hangs ? NOT_IN_TIME : UNANSWERED;
    if (json_object_get(answer, "result")) {
        outcome = ACKNOWLEDGED;
    } else if (answer) {
        const json_t *error = json_object_get(answer, "error");
        json_int_t code = json_integer_value(json_object_get(error, "code"));
        const char *message = json_string_value(json_object_get(error, "message"));
        bool is_ours = code == INTERNAL || code == STORE || code == STOPPING;
        outcome = is_ours && message && *message ? REFUSED : WRONG_BLAME;
    }
    json_decref(answer);
    return outcome;
}

static void join_tags(const json_t *tags, char joined[PROMISE_TAGS_BYTES])
{
    size_t used = 0;
    size_t index = 0;
    const json_t *tag = NULL;
    joined[0] = '\0';
    json_array_foreach(tags, index, tag)
    {
        used += (size_t)snprintf(joined + used, PROMISE_TAGS_BYTES - used, "%s%s",
                                 index > 0 ? "," : "", json_string_value(tag));
        assert_true(used < PROMISE_TAGS_BYTES);
    }
}

const char *promises_compare(const struct promise *entry, const json_t *answer,
                             char ret_found[PROMISE_TAGS_BYTES])
{
    const json_t *result = json_object_get(answer, "result");
    const json_t *error = json_object_get(answer, "error");
    (void)snprintf(ret_found, PROMISE_TAGS_BYTES, "%s", "no answer");
    if (result) {
        join_tags(json_object_get(result, "tags"), ret_found);
    } else if (json_integer_value(json_object_get(error, "code")) == NOT_THERE) {
        (void)snprintf(ret_found, PROMISE_TAGS_BYTES, "%s", PROMISE_GONE);
    }
    bool is_before = strcmp(ret_found, entry->before) == 0;
    bool is_after = strcmp(ret_found, entry->after) == 0;
    if (!is_before && !is_after) {
        return "is half done";
    }
    if (entry->outcome == ACKNOWLEDGED && !is_after) {
        return "was acknowledged and is not there";
    }
    return entry->outcome == REFUSED && !is_before ? "was refused and is there" : NULL;
}
