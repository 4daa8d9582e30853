/*
 * state: how the daemon is.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "client/command.h"
#include "client/facts.h"
#include "client/format.h"

enum {
    NAME_COLUMNS = 26 /* settings have long names */
};

/* A value of any kind as one line; objects and arrays as JSON. -1: no memory. */
static int print_value(const struct client *client, const char *name, const json_t *value)
{
    char figure[FORMAT_BYTES];
    if (json_is_string(value)) {
        return facts_print(&client->out, NAME_COLUMNS, name, json_string_value(value));
    }
    if (json_is_integer(value)) {
        return facts_print(&client->out, NAME_COLUMNS, name,
                           format_count(json_integer_value(value), figure));
    }
    if (json_is_real(value)) {
        return facts_printf(&client->out, NAME_COLUMNS, name, "%.6g", json_real_value(value));
    }
    if (json_is_boolean(value)) {
        return facts_print(&client->out, NAME_COLUMNS, name, json_is_true(value) ? "yes" : "no");
    }
    if (json_is_null(value)) {
        return facts_print(&client->out, NAME_COLUMNS, name, "none");
    }
    char *text = json_dumps(value, JSON_COMPACT);
    int result = text ? facts_print(&client->out, NAME_COLUMNS, name, text) : -1;
    free(text);
    return result;
}

enum unit {
    UNIT_NONE,
    UNIT_BYTES,
    UNIT_PER_SECOND
};

static int print_member(const struct client *client, const char *name, const json_t *value,
                        enum unit unit)
{
    char figure[FORMAT_BYTES];
    if (unit == UNIT_BYTES && json_is_number(value)) {
        return facts_print(&client->out, NAME_COLUMNS, name,
                           format_size(json_number_value(value), figure));
    }
    if (unit == UNIT_PER_SECOND && json_is_number(value)) {
        return facts_printf(&client->out, NAME_COLUMNS, name, "%.1f a second",
                            json_number_value(value));
    }
    return print_value(client, name, value);
}

/* A heading and the members of an object below it; nothing for an empty one. */
static int print_section(const struct client *client, const json_t *state, const char *name,
                         const char *heading, enum unit unit)
{
    json_t *section = json_object_get(state, name);
    if (json_object_size(section) == 0) {
        return 0;
    }
    (void)fprintf(client->out.stream, "\n%s%s%s\n", screen_begin(&client->out, SCREEN_HEADING),
                  heading, screen_end(&client->out, SCREEN_HEADING)); /* errors stay there */
    const char *member;
    json_t *value;
    json_object_foreach(section, member, value)
    {
        char label[128];
        (void)snprintf(label, sizeof label, "  %s", member); /* a long one is cut */
        for (char *c = label; *c; c++) {
            if (*c == '_') {
                *c = ' ';
            }
        }
        if (print_member(client, label, value, unit)) {
            return -1;
        }
    }
    return 0;
}

static int print_counts(const struct client *client, const json_t *state)
{
    static const char *const COUNTS[] = {"items", "tags", "words", "weights", "connections"};
    for (size_t i = 0; i < sizeof COUNTS / sizeof COUNTS[0]; i++) {
        const json_t *count = json_object_get(state, COUNTS[i]);
        if (count && print_value(client, COUNTS[i], count)) {
            return -1;
        }
    }
    char seq[FORMAT_BYTES];
    char learned[FORMAT_BYTES];
    char backlog[FORMAT_BYTES];
    return facts_printf(&client->out, NAME_COLUMNS, "changes", "%s, learned up to %s, %s behind",
                        format_count(command_whole(state, "seq"), seq),
                        format_count(command_whole(state, "learned"), learned),
                        format_count(command_whole(state, "backlog"), backlog));
}

/* What a running rebuild is learned with and the model in use is not, as "loss hinge, step 0.25";
 * cut where it is long. */
static void list_differences(const json_t *wanted, const json_t *used, char *list, size_t size)
{
    size_t length = 0;
    const char *name;
    json_t *value;
    list[0] = '\0';
    json_object_foreach((json_t *)wanted, name, value) /* it is only read */
    {
        if (json_equal(value, json_object_get(used, name)) || length >= size) {
            continue;
        }
        char *text = json_is_string(value)
                         ? NULL
                         : json_dumps(value, JSON_ENCODE_ANY | JSON_REAL_PRECISION(6));
        int written = snprintf(list + length, size - length, "%s%s %s", length > 0 ? ", " : "",
                               name, text ? text : command_text(wanted, name));
        length += written > 0 ? (size_t)written : 0;
        free(text);
    }
}

/* Nothing while none runs. */
static int print_rebuild(const struct client *client, const json_t *state)
{
    enum {
        LIST_BYTES = 400
    };
    char learned[FORMAT_BYTES];
    char of[FORMAT_BYTES];
    char list[LIST_BYTES];
    const json_t *rebuild = json_object_get(state, "rebuild");
    if (!json_is_object(rebuild)) {
        return 0;
    }
    list_differences(json_object_get(rebuild, "settings"), json_object_get(state, "settings"), list,
                     sizeof list);
    return facts_printf(&client->out, NAME_COLUMNS, "rebuild", "learned %s of %s changes%s%s",
                        format_count(command_whole(rebuild, "learned"), learned),
                        format_count(command_whole(rebuild, "of"), of), *list ? ", with " : "",
                        list);
}

/* Nothing while none is written. */
static int print_backup(const struct client *client, const json_t *state)
{
    char bytes[FORMAT_BYTES];
    char of[FORMAT_BYTES];
    const json_t *backup = json_object_get(state, "backup");
    if (!json_is_object(backup)) {
        return 0;
    }
    return facts_printf(&client->out, NAME_COLUMNS, "backup", "%s, %s of %s written",
                        command_text(backup, "name"),
                        format_size(command_number(backup, "bytes"), bytes),
                        format_size(command_number(backup, "of"), of));
}

static int print_faults(const struct client *client, const json_t *faults)
{
    size_t i;
    json_t *fault;
    json_array_foreach(faults, i, fault)
    {
        if (print_value(client, i == 0 ? "faults" : "", fault)) {
            return -1;
        }
    }
    return 0;
}

static int print_state(const struct client *client, const json_t *state)
{
    char up[FORMAT_BYTES];
    if (facts_printf(&client->out, NAME_COLUMNS, "undertagd", "%s, up %s, store format %lld",
                     command_text(state, "version"),
                     format_duration(command_number(state, "uptime_s"), up),
                     (long long)command_whole(state, "format")) ||
        print_counts(client, state) || print_rebuild(client, state) ||
        print_backup(client, state) || print_faults(client, json_object_get(state, "faults")) ||
        print_section(client, state, "rates", "Rates", UNIT_PER_SECOND) ||
        print_section(client, state, "memory", "Memory", UNIT_BYTES) ||
        print_section(client, state, "disk", "Disk", UNIT_BYTES) ||
        print_section(client, state, "rehearsal", "Rehearsal", UNIT_NONE) ||
        print_section(client, state, "pruned", "Weights left out again", UNIT_NONE) ||
        print_section(client, state, "snapshot", "Last snapshot", UNIT_NONE) ||
        print_section(client, state, "limits", "Limits", UNIT_NONE) ||
        print_section(client, state, "settings", "Settings", UNIT_NONE)) {
        return -1;
    }
    return 0;
}

static int run(struct client *client, const struct args *args, struct failure *failure)
{
    (void)args; /* no words, no options */
    struct wire_answer answer = {0};
    int code = command_ask_take(client, "daemon.state", json_object(), &answer, failure);
    if (code) {
        return code;
    }
    if (client->json) {
        command_print_json(client, &answer);
    } else if (print_state(client, answer.result)) {
        code = failure_memory(failure);
    }
    wire_answer_deinit(&answer);
    return code;
}

const struct command command_state = {
    .name = "state",
    .synopsis = "",
    .summary = "how the daemon is: counts, rates, memory, limits, settings",
    .about = "",
    .run = run,
};
