/*
 * snapshot write, snapshot list: what the learner knows as a folder of files that others can load.
 *
 * Writing is one call, which is answered once the snapshot is whole. How far it is comes from
 * daemon.state, asked over a second connection, and only where somebody looks at the line.
 */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "client/command.h"
#include "client/facts.h"
#include "client/format.h"
#include "client/json_memory.h"
#include "client/progress.h"
#include "client/request.h"
#include "client/table.h"

enum {
    ASK_EVERY_MS = 200
};

static const struct reply_member WRITTEN[] = {
    {"name", REPLY_TEXT, false, NULL},      {"path", REPLY_TEXT, false, NULL},
    {"seq", REPLY_NUMBER, false, NULL},     {"bytes", REPLY_NUMBER, false, NULL},
    {"seconds", REPLY_NUMBER, false, NULL}, {0}};

static const struct reply_member RUNNING[] = {{"running", REPLY_TRUTH, false, NULL},
                                              {"bytes", REPLY_NUMBER, false, NULL},
                                              {"of", REPLY_NUMBER, false, NULL},
                                              {0}};

static const struct reply_member STATE[] = {{"snapshot", REPLY_OBJECT, true, RUNNING}, {0}};

/* --- write: what is asked --------------------------------------------------------------------- */

enum {
    NAME,
    ITEMS,
    NO_PROPOSALS,
    FLOOR,
    RATE
};

static const struct args_option WRITE_OPTIONS[] = {
    [NAME] = {"name", ARGS_TEXT, "NAME", 0, 0,
              "call it so, and never remove it by itself (default: its time and change, removed "
              "when newer ones have come)"},
    [ITEMS] = {"items", ARGS_FLAG, NULL, 0, 0,
               "write the items, texts and rulings and all, in the form that 'undertag file' takes "
               "back"},
    [NO_PROPOSALS] = {"no-proposals", ARGS_FLAG, NULL, 0, 0, "leave out what the items may lack"},
    [FLOOR] = {"floor", ARGS_NUMBER, "X", 0, 1,
               "the least chance of what an item may lack (default: the daemon's snapshot_floor)"},
    [RATE] = {"rate", ARGS_SIZE, "BYTES", 0x1p20, 0x1p50,
              "write at most so many bytes a second, such as 16MiB (default: the daemon's "
              "snapshot_rate)"},
};

static int make_params(const struct args_value *values, json_t **ret_params,
                       struct failure *failure)
{
    json_t *params = json_object();
    int code = params ? 0 : failure_memory(failure);
    if (!code) {
        code = request_text(params, "name", &values[NAME], failure);
    }
    if (!code && values[ITEMS].given && json_object_set_new(params, "items", json_true())) {
        code = failure_memory(failure);
    }
    if (!code && values[NO_PROPOSALS].given &&
        json_object_set_new(params, "proposals", json_false())) {
        code = failure_memory(failure);
    }
    if (!code) {
        code = request_number(params, "floor", &values[FLOOR], failure);
    }
    if (!code) {
        code = request_whole(params, "rate", &values[RATE], failure);
    }
    if (code) {
        json_decref(params);
        return code;
    }
    *ret_params = params;
    return 0;
}

/* --- write: waiting --------------------------------------------------------------------------- */

/* The second connection and the line; `wire` is NULL where nobody looks. */
struct watch {
    struct wire *wire;
    struct screen screen;
    struct progress progress;
};

static int64_t now_ms(void)
{
    struct timespec now = {0};
    (void)clock_gettime(CLOCK_MONOTONIC, &now); /* always there on Linux */
    return (int64_t)now.tv_sec * 1000 + now.tv_nsec / 1000000;
}

static void watch_end(struct watch *watch)
{
    progress_clear(&watch->progress);
    wire_free(watch->wire);
    watch->wire = NULL;
}

/* A daemon that takes no second connection is waited for without a line. */
static void watch_begin(struct watch *watch, const struct client *client)
{
    struct failure unsaid = {0};
    *watch = (struct watch){.screen = client->err};
    progress_init(&watch->progress, &watch->screen, 0, now_ms());
    watch->progress.is_size = true;
    if (client->err.renews && wire_open(client->socket_path, &watch->wire, &unsaid)) {
        watch->wire = NULL;
    }
}

static void watch_look(struct watch *watch)
{
    struct failure unsaid = {0};
    struct wire_answer answer = {0};
    int code = wire_call_take(watch->wire, "daemon.state", json_object(), &answer, &unsaid);
    if (!code) {
        code = reply_check(answer.result, STATE, &unsaid);
    }
    const json_t *snapshot = json_object_get(answer.result, "snapshot");
    if (code) {
        watch_end(watch);
    } else if (json_is_true(json_object_get(snapshot, "running"))) {
        uint64_t bytes = (uint64_t)command_whole(snapshot, "bytes");
        progress_expect(&watch->progress, (uint64_t)command_whole(snapshot, "of"));
        progress_update(&watch->progress, bytes, bytes, now_ms());
    }
    wire_answer_deinit(&answer);
}

/* Waits for the one answer that is due. */
static int wait_for_answer(struct wire *wire, struct watch *watch, struct wire_answer *ret_answer,
                           struct failure *failure)
{
    int64_t asked_ms = 0;
    int code = 0;
    while (!code) {
        code = wire_next(wire, ret_answer, failure);
        if (code == 0) {
            code = wire_closed(wire)
                       ? wire_fail_closed(wire, failure)
                       : wire_turn(wire, NULL, watch->wire ? ASK_EVERY_MS : -1, failure);
        }
        if (code == 0 && watch->wire && now_ms() - asked_ms >= ASK_EVERY_MS) {
            watch_look(watch);
            asked_ms = now_ms();
        }
    }
    return code < 0 ? code : 0;
}

static int write_one(const struct client *client, struct wire *wire, const char *params,
                     struct wire_answer *ret_answer, struct failure *failure)
{
    int64_t id = 0;
    struct watch watch;
    int code = wire_queue(wire, "snapshot.write", params, strlen(params), &id, failure);
    if (code) {
        return code;
    }
    watch_begin(&watch, client);
    code = wait_for_answer(wire, &watch, ret_answer, failure);
    watch_end(&watch);
    if (!code) {
        code = wire_check(wire, ret_answer, id, failure);
    }
    if (!code) {
        code = reply_check(ret_answer->result, WRITTEN, failure);
    }
    return code;
}

static int print_written(const struct client *client, const json_t *result)
{
    char seq[FORMAT_BYTES];
    char size[FORMAT_BYTES];
    const struct screen *out = &client->out;
    return facts_print(out, FACTS_NAME_COLUMNS, "snapshot", command_text(result, "name")) ||
                   facts_print(out, FACTS_NAME_COLUMNS, "of change",
                               format_count(command_whole(result, "seq"), seq)) ||
                   facts_printf(out, FACTS_NAME_COLUMNS, "size", "%s, written in %.1f s",
                                format_size(command_number(result, "bytes"), size),
                                command_number(result, "seconds")) ||
                   facts_print(out, FACTS_NAME_COLUMNS, "folder", command_text(result, "path"))
               ? -1
               : 0;
}

static int run_write(struct client *client, const struct args *args, struct failure *failure)
{
    json_t *params = NULL;
    struct wire *wire = NULL;
    struct wire_answer answer = {0};
    int code = make_params(args->values, &params, failure);
    if (code) {
        return code;
    }
    char *text = json_memory_text(params);
    json_decref(params);
    if (!text) {
        return failure_memory(failure);
    }
    code = wire_open(client->socket_path, &wire, failure);
    if (!code) {
        code = write_one(client, wire, text, &answer, failure);
    }
    if (!code && client->json) {
        command_print_json(client, &answer);
    } else if (!code && print_written(client, answer.result)) {
        code = failure_memory(failure);
    }
    wire_answer_deinit(&answer);
    wire_free(wire);
    free(text);
    return code;
}

const struct command command_snapshot_write = {
    .name = "snapshot write",
    .synopsis = "",
    .summary = "what was learned, as a folder of files that others can load",
    .about = "Writes weights, tags, words, chances and proposals as of one change into a folder of "
             "the daemon's export_dir, in open formats (storage/SNAPSHOT.md), and waits until it "
             "is whole; items are filed and asked about meanwhile. The link 'latest' there then "
             "leads to it. Leaving this command does not end the writing: 'undertag state' shows "
             "how far it is.",
    .options = WRITE_OPTIONS,
    .option_count = sizeof WRITE_OPTIONS / sizeof WRITE_OPTIONS[0],
    .run = run_write,
};

/* --- list ------------------------------------------------------------------------------------- */

static const struct reply_member FOUND[] = {
    {"name", REPLY_TEXT, false, NULL},    {"path", REPLY_TEXT, false, NULL},
    {"seq", REPLY_NUMBER, false, NULL},   {"at", REPLY_TEXT, false, NULL},
    {"bytes", REPLY_NUMBER, false, NULL}, {0}};

static const struct reply_member LIST[] = {{"snapshots", REPLY_OBJECTS, false, FOUND}, {0}};

static const struct table_column COLUMNS[] = {{.heading = "name", .shortens = true},
                                              {.heading = "change", .right = true},
                                              {.heading = "size", .right = true},
                                              {.heading = "written"},
                                              {.heading = "", .style = SCREEN_QUIET}};

static bool is_set(const json_t *snapshot, const char *member)
{
    return json_is_true(json_object_get(snapshot, member));
}

/* What is to be said of one beside its figures. */
static const char *remark(const json_t *snapshot)
{
    static const char *const REMARKS[2][2] = {{"", "named, stays"},
                                              {"latest", "latest; named, stays"}};
    return REMARKS[is_set(snapshot, "latest")][is_set(snapshot, "named")];
}

/* The folder that they are in: all have the same. */
static int print_folder(const struct client *client, const json_t *snapshot)
{
    const char *path = command_text(snapshot, "path");
    const char *slash = strrchr(path, '/');
    char *sentence = NULL;
    if (!slash || asprintf(&sentence, "\nThey are in %.*s.", (int)(slash - path), path) < 0) {
        return slash ? -1 : 0;
    }
    int result = facts_text(&client->out, sentence, 0);
    free(sentence);
    return result;
}

static int add_rows(struct table *table, const json_t *list)
{
    size_t i;
    json_t *snapshot;
    json_array_foreach(list, i, snapshot)
    {
        char seq[FORMAT_BYTES];
        char size[FORMAT_BYTES];
        const char *cells[] = {command_text(snapshot, "name"),
                               format_count(command_whole(snapshot, "seq"), seq),
                               format_size(command_number(snapshot, "bytes"), size),
                               command_text(snapshot, "at"), remark(snapshot)};
        if (table_add(table, cells)) {
            return -1;
        }
    }
    return 0;
}

static int print_list(const struct client *client, const json_t *result, const struct args *args)
{
    (void)args; /* no words, no options */
    const json_t *list = json_object_get(result, "snapshots");
    if (json_array_size(list) == 0) {
        (void)fprintf(client->out.stream, "There are no snapshots yet.\n"); /* seen at the end */
        return 0;
    }
    struct table *table = table_new(COLUMNS, sizeof COLUMNS / sizeof COLUMNS[0]);
    int code = table && !add_rows(table, list) && !table_print(table, &client->out) &&
                       !print_folder(client, json_array_get(list, 0))
                   ? 0
                   : -1;
    table_free(table);
    return code;
}

static int run_list(struct client *client, const struct args *args, struct failure *failure)
{
    static const struct command_question QUESTION = {"snapshot.list", LIST, print_list};
    return command_show_take(client, &QUESTION, json_object(), args, failure);
}

const struct command command_snapshot_list = {
    .name = "snapshot list",
    .synopsis = "",
    .summary = "the snapshots that are there, oldest first",
    .about = "Shows which change each is of. The link 'latest' beside them leads to one that is "
             "whole at any moment. Old ones go as the daemon's snapshot_keep says, but not those "
             "that were given a name.",
    .run = run_list,
};
