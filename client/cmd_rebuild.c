/*
 * rebuild: has the daemon learn its items anew, and waits for it if asked to.
 */
#include <poll.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "client/command.h"
#include "client/facts.h"
#include "client/format.h"
#include "client/progress.h"
#include "client/request.h"

enum {
    SET,
    WAIT
};

enum {
    ASK_EVERY_MS = 200,
    NAME_BYTES = 64
};

static const struct args_option OPTIONS[] = {
    [SET] = {"set", ARGS_LIST, "NAME=VALUE", 0, 0,
             "learn with this setting, one that 'undertag state' lists; may be given again"},
    [WAIT] = {"wait", ARGS_FLAG, NULL, 0, 0, "wait until the new model is in use"},
};

static const struct reply_member BEGUN[] = {{"seq", REPLY_NUMBER, false, NULL}, {0}};

static const struct reply_member RUNNING[] = {{"learned", REPLY_NUMBER, false, NULL},
                                              {"of", REPLY_NUMBER, false, NULL},
                                              {"seq", REPLY_NUMBER, false, NULL},
                                              {0}};

static const struct reply_member ENDED[] = {
    {"seq", REPLY_NUMBER, false, NULL}, {"failure", REPLY_TEXT, true, NULL}, {0}};

static const struct reply_member STATE[] = {{"rebuild", REPLY_OBJECT, true, RUNNING},
                                            {"rebuilt", REPLY_OBJECT, true, ENDED},
                                            {"learned", REPLY_NUMBER, false, NULL},
                                            {0}};

/* --- what is asked ---------------------------------------------------------------------------- */

static int add_setting(json_t *settings, const char *pair, struct failure *failure)
{
    const char *equals = strchr(pair, '=');
    if (!equals || equals == pair || equals - pair >= NAME_BYTES) {
        return failure_set(failure, FAILURE_USAGE, "--set takes NAME=VALUE, not '%s'", pair);
    }
    char name[NAME_BYTES];
    (void)snprintf(name, sizeof name, "%.*s", (int)(equals - pair), pair);
    if (json_object_get(settings, name)) {
        return failure_set(failure, FAILURE_USAGE, "--set gives %s twice", name);
    }
    return json_object_set_new(settings, name, json_string(equals + 1)) < 0
               ? failure_memory(failure)
               : 0;
}

static int make_params(const struct args_value *set, json_t **ret_params, struct failure *failure)
{
    json_t *settings = json_object();
    json_t *params = json_pack("{s:o}", "settings", settings);
    if (!params) {
        return failure_memory(failure);
    }
    for (size_t i = 0; i < set->list_count; i++) {
        int code = add_setting(settings, set->list[i], failure);
        if (code) {
            json_decref(params);
            return code;
        }
    }
    *ret_params = params;
    return 0;
}

/* --- waiting ---------------------------------------------------------------------------------- */

static int64_t now_ms(void)
{
    struct timespec now;
    (void)clock_gettime(CLOCK_MONOTONIC, &now); /* always there on Linux */
    return (int64_t)now.tv_sec * 1000 + now.tv_nsec / 1000000;
}

/* Shows how far it has come; *ret_runs says whether it is still under way. */
static int look(struct wire *wire, struct progress *progress, struct wire_answer *ret_answer,
                bool *ret_runs, struct failure *failure)
{
    int code = wire_call_take(wire, "daemon.state", json_object(), ret_answer, failure);
    if (!code) {
        code = reply_check(ret_answer->result, STATE, failure);
    }
    if (code) {
        return code;
    }
    const json_t *running = json_object_get(ret_answer->result, "rebuild");
    *ret_runs = json_is_object(running);
    if (*ret_runs) {
        uint64_t learned = (uint64_t)command_whole(running, "learned");
        progress_expect(progress, (uint64_t)command_whole(running, "of"));
        progress_update(progress, learned, learned, now_ms());
    }
    return 0;
}

/* What became of the one that began at `seq`. */
static int tell_end(const struct client *client, const json_t *state, int64_t seq,
                    struct failure *failure)
{
    char figure[FORMAT_BYTES];
    const json_t *ended = json_object_get(state, "rebuilt");
    const char *reason = command_text(ended, "failure");
    if (!json_is_object(ended) || command_whole(ended, "seq") != seq) {
        return failure_set(failure, FAILURE_AGAIN,
                           "the daemon does not say what became of the rebuild");
    }
    if (*reason) {
        return failure_set(failure, FAILURE_AGAIN, "%s", reason);
    }
    if (client->json) {
        return 0;
    }
    return facts_printf(&client->out, FACTS_NAME_COLUMNS, "in use",
                        "the new model, learned up to "
                        "change %s",
                        format_count(command_whole(state, "learned"), figure))
               ? failure_memory(failure)
               : 0;
}

static int wait_for_end(struct client *client, struct wire *wire, int64_t seq,
                        struct failure *failure)
{
    struct screen screen = client->err;
    struct progress progress;
    struct wire_answer answer = {0};
    bool runs = true;
    int code = 0;
    progress_init(&progress, &screen, (uint64_t)seq, now_ms());
    progress.noun = "change";
    while (!code && runs) {
        wire_answer_deinit(&answer);
        answer = (struct wire_answer){0};
        code = look(wire, &progress, &answer, &runs, failure);
        if (!code && runs) {
            (void)poll(NULL, 0, ASK_EVERY_MS); /* a signal ends the program, not the wait */
        }
    }
    progress_clear(&progress);
    if (!code) {
        code = tell_end(client, answer.result, seq, failure);
    }
    wire_answer_deinit(&answer);
    return code;
}

/* --- the command ------------------------------------------------------------------------------ */

static int begin(struct client *client, struct wire *wire, json_t *params, int64_t *ret_seq,
                 struct failure *failure)
{
    char figure[FORMAT_BYTES];
    struct wire_answer answer = {0};
    int code = wire_call_take(wire, "daemon.rebuild", params, &answer, failure);
    if (!code) {
        code = reply_check(answer.result, BEGUN, failure);
    }
    if (code) {
        wire_answer_deinit(&answer);
        return code;
    }
    *ret_seq = command_whole(answer.result, "seq");
    if (client->json) {
        command_print_json(client, &answer);
    } else if (facts_printf(&client->out, FACTS_NAME_COLUMNS, "rebuilding", "from %s changes",
                            format_count(*ret_seq, figure))) {
        code = failure_memory(failure);
    }
    wire_answer_deinit(&answer);
    return code ? code : command_flush(failure);
}

static int run(struct client *client, const struct args *args, struct failure *failure)
{
    json_t *params = NULL;
    struct wire *wire = NULL;
    int64_t seq = 0;
    int code = make_params(&args->values[SET], &params, failure);
    if (code) {
        return code;
    }
    code = wire_open(client->socket_path, &wire, failure);
    if (code) {
        json_decref(params);
        return code;
    }
    code = begin(client, wire, params, &seq, failure);
    if (!code && args->values[WAIT].given) {
        code = wait_for_end(client, wire, seq, failure);
    }
    wire_free(wire);
    return code;
}

const struct command command_rebuild = {
    .name = "rebuild",
    .synopsis = "",
    .summary = "learn all items anew, with other settings if you like",
    .about = "A second model is learned from the stored items beside the one in use, and takes its "
             "place once it has caught up. Until then nothing changes but that the daemon needs "
             "the disk of both. Settings that are not given stay as they are; those that are "
             "stay in force after a restart, until the configuration is changed on them. Leaving "
             "this command does not end the rebuild: 'undertag state' shows how far it is.",
    .options = OPTIONS,
    .option_count = sizeof OPTIONS / sizeof OPTIONS[0],
    .run = run,
};
