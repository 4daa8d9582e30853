/*
 * backup: has the daemon write a copy of all that it stores. The answer comes at the end; meanwhile
 * a second connection asks how far it is, where there is a terminal to show it on.
 */
#include <limits.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#include "client/command.h"
#include "client/facts.h"
#include "client/format.h"
#include "client/json_memory.h"
#include "client/progress.h"
#include "client/request.h"

enum {
    RATE
};

enum {
    ASK_EVERY_MS = 200,
    KILO = 1000
};

static const struct args_option OPTIONS[] = {
    [RATE] = {"rate", ARGS_WHOLE, "BYTES", 1 << 20, 1e12,
              "write so many bytes a second at most (64 MiB; not less than 1 MiB)"},
};

static const struct reply_member WRITTEN[] = {{"name", REPLY_TEXT, false, NULL},
                                              {"path", REPLY_TEXT, false, NULL},
                                              {"seq", REPLY_NUMBER, false, NULL},
                                              {"learned", REPLY_NUMBER, false, NULL},
                                              {"bytes", REPLY_NUMBER, false, NULL},
                                              {"seconds", REPLY_NUMBER, false, NULL},
                                              {0}};

/* --- what is asked ---------------------------------------------------------------------------- */

/* The daemon has a working folder of its own: a path is told from the root on. */
static int add_name(json_t *params, const char *word, struct failure *failure)
{
    char path[2 * PATH_MAX];
    char here[PATH_MAX];
    json_t *name = NULL;
    if (strchr(word, '/') && word[0] != '/') {
        if (!getcwd(here, sizeof here) || strlen(word) >= PATH_MAX) {
            return failure_set(failure, FAILURE_USAGE, "%s cannot be told from the root on", word);
        }
        (void)snprintf(path, sizeof path, "%s/%s", here, word); /* it fits */
        word = path;
    }
    int code = command_string(word, "the name", &name, failure);
    if (!code && json_object_set_new(params, "name", name)) {
        code = failure_memory(failure);
    }
    return code;
}

static int make_params(const struct args *args, char **ret_params, struct failure *failure)
{
    json_t *params = json_object();
    int code = params ? 0 : failure_memory(failure);
    if (!code && args->word_count > 0) {
        code = add_name(params, args->words[0], failure);
    }
    if (!code) {
        code = request_whole(params, "rate", &args->values[RATE], failure);
    }
    if (!code) {
        *ret_params = json_memory_text(params);
        code = *ret_params ? 0 : failure_memory(failure);
    }
    json_decref(params);
    return code;
}

/* --- waiting ---------------------------------------------------------------------------------- */

static int64_t now_ms(void)
{
    struct timespec now;
    (void)clock_gettime(CLOCK_MONOTONIC, &now); /* always there on Linux */
    return (int64_t)now.tv_sec * 1000 + now.tv_nsec / 1000000;
}

/* How far it is: only to be shown, so what cannot be asked is not. */
struct watcher {
    struct wire *wire; /* NULL: nobody looks, or it may not be asked */
    struct screen screen;
    struct progress progress;
};

static void watcher_init(struct watcher *watcher, const struct client *client)
{
    struct failure unseen = {0};
    watcher->wire = NULL;
    watcher->screen = client->err;
    progress_init(&watcher->progress, &watcher->screen, 0, now_ms());
    watcher->progress.noun = "kilobyte";
    if (watcher->screen.renews && wire_open(client->socket_path, &watcher->wire, &unseen) != 0) {
        watcher->wire = NULL;
    }
}

static void watcher_deinit(struct watcher *watcher)
{
    progress_clear(&watcher->progress);
    wire_free(watcher->wire);
}

static void watcher_look(struct watcher *watcher)
{
    struct wire_answer answer = {0};
    struct failure unseen = {0};
    if (!watcher->wire) {
        return;
    }
    if (wire_call_take(watcher->wire, "daemon.state", json_object(), &answer, &unseen) == 0) {
        const json_t *backup = json_object_get(answer.result, "backup");
        uint64_t done = (uint64_t)command_whole(backup, "bytes") / KILO;
        progress_expect(&watcher->progress, (uint64_t)command_whole(backup, "of") / KILO);
        progress_update(&watcher->progress, done, done, now_ms());
    } else {
        wire_free(watcher->wire);
        watcher->wire = NULL;
    }
    wire_answer_deinit(&answer);
}

static int wait_for_answer(const struct client *client, struct wire *wire, int64_t id,
                           struct wire_answer *ret_answer, struct failure *failure)
{
    struct watcher watcher;
    int came = 0;
    watcher_init(&watcher, client);
    while (came == 0) {
        came = wire_turn(wire, NULL, watcher.wire ? ASK_EVERY_MS : -1, failure);
        if (came == 0) {
            came = wire_next(wire, ret_answer, failure);
        }
        if (came == 0 && wire_closed(wire)) {
            came = wire_fail_closed(wire, failure);
        }
        if (came == 0) {
            watcher_look(&watcher);
        }
    }
    watcher_deinit(&watcher);
    if (came < 0) {
        return came;
    }
    return wire_check(wire, ret_answer, id, failure);
}

/* --- the command ------------------------------------------------------------------------------ */

static int print(const struct client *client, const json_t *result)
{
    char size[FORMAT_BYTES];
    char time[FORMAT_BYTES];
    char seq[FORMAT_BYTES];
    char learned[FORMAT_BYTES];
    return facts_print(&client->out, FACTS_NAME_COLUMNS, "backup", command_text(result, "path")) ||
                   facts_printf(&client->out, FACTS_NAME_COLUMNS, "holds",
                                "all up to change %s, learned up to %s",
                                format_count(command_whole(result, "seq"), seq),
                                format_count(command_whole(result, "learned"), learned)) ||
                   facts_printf(&client->out, FACTS_NAME_COLUMNS, "size", "%s, written in %s",
                                format_size(command_number(result, "bytes"), size),
                                format_duration(command_number(result, "seconds"), time))
               ? -1
               : 0;
}

static int ask(struct client *client, struct wire *wire, const char *params,
               struct failure *failure)
{
    int64_t id = 0;
    struct wire_answer answer = {0};
    int code = wire_queue(wire, "backup.write", params, strlen(params), &id, failure);
    if (!code) {
        code = wait_for_answer(client, wire, id, &answer, failure);
    }
    if (!code && client->json) {
        command_print_json(client, &answer);
    } else if (!code) {
        code = reply_check(answer.result, WRITTEN, failure);
        if (!code && print(client, answer.result)) {
            code = failure_memory(failure);
        }
    }
    wire_answer_deinit(&answer);
    return code ? code : command_flush(failure);
}

static int run(struct client *client, const struct args *args, struct failure *failure)
{
    char *params = NULL;
    struct wire *wire = NULL;
    int code = make_params(args, &params, failure);
    if (!code) {
        code = wire_open(client->socket_path, &wire, failure);
    }
    if (!code) {
        code = ask(client, wire, params, failure);
    }
    wire_free(wire);
    free(params);
    return code;
}

const struct command command_backup = {
    .name = "backup",
    .synopsis = "[NAME]",
    .summary = "write a copy of all that is stored, while the daemon goes on",
    .about =
        "The copy is a folder NAME (default: one made of the time) in the folder that the "
        "daemon's option export_dir names; a path is taken where it lies in there. It gets its "
        "name when it is whole. Make a home of it with 'undertagd --home DIR --restore "
        "FOLDER'. This command waits until it is written; leaving it does not end that: "
        "'undertag state' shows how far it is.",
    .options = OPTIONS,
    .option_count = sizeof OPTIONS / sizeof OPTIONS[0],
    .most_words = 1,
    .run = run,
};
