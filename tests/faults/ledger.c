#include "tests/faults/ledger.h"

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

void ledger_deinit(struct ledger *ledger)
{
    free(ledger->entries);
    *ledger = (struct ledger){0};
}

void ledger_note(struct ledger *ledger, const char *id, const char *before, const char *after,
                 enum outcome outcome)
{
    if (ledger->count == ledger->capacity) {
        ledger->capacity = 2 * ledger->capacity + 64;
        ledger->entries = realloc(ledger->entries, ledger->capacity * sizeof ledger->entries[0]);
        assert_non_null(ledger->entries);
    }
    struct ledger_entry *entry = &ledger->entries[ledger->count++];
    *entry = (struct ledger_entry){.before = before, .after = after, .outcome = outcome};
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

static void join_tags(const json_t *tags, char joined[LEDGER_TAGS_BYTES])
{
    size_t used = 0;
    size_t index = 0;
    const json_t *tag = NULL;
    joined[0] = '\0';
    json_array_foreach(tags, index, tag)
    {
        used += (size_t)snprintf(joined + used, LEDGER_TAGS_BYTES - used, "%s%s",
                                 index > 0 ? "," : "", json_string_value(tag));
        assert_true(used < LEDGER_TAGS_BYTES);
    }
}

const char *ledger_compare(const struct ledger_entry *entry, const json_t *answer,
                           char ret_found[LEDGER_TAGS_BYTES])
{
    const json_t *result = json_object_get(answer, "result");
    const json_t *error = json_object_get(answer, "error");
    (void)snprintf(ret_found, LEDGER_TAGS_BYTES, "%s", "no answer");
    if (result) {
        join_tags(json_object_get(result, "tags"), ret_found);
    } else if (json_integer_value(json_object_get(error, "code")) == NOT_THERE) {
        (void)snprintf(ret_found, LEDGER_TAGS_BYTES, "%s", LEDGER_GONE);
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
