/*
 * phase: many requests of one method, ready made, sent pipelined and answered; and waiting until
 * the daemon has learned all it was given.
 */
#ifndef UNDERTAG_BENCH_PHASE_H
#define UNDERTAG_BENCH_PHASE_H

#include <stdbool.h>
#include <string.h>

#include "client/wire.h"
#include "tests/bench/corpus.h"

/* Requests under way at once, over all clients. */
enum {
    PHASE_WINDOW = 2048
};

/* The params are ready made, so that making them is not measured. */
struct phase {
    const char *method;
    char **params;
    size_t count;
    size_t window;
};

static inline int phase_take_answers(struct wire *wire, size_t *answered, struct failure *failure)
{
    struct wire_answer answer = {0};
    int found = 0;
    while ((found = wire_next(wire, &answer, failure)) == 1) {
        (*answered)++;
        int code = answer.code != 0 ? wire_fail(&answer, failure) : 0;
        wire_answer_deinit(&answer);
        if (code != 0) {
            return code;
        }
    }
    return found;
}

/* Sends all of it and takes all answers; 0, or the failure's code. */
static inline int phase_run(struct wire *wire, const struct phase *phase, struct failure *failure)
{
    size_t sent = 0;
    size_t answered = 0;
    int64_t id = 0;
    while (answered < phase->count) {
        while (sent < phase->count && sent - answered < phase->window) {
            if (wire_queue(wire, phase->method, phase->params[sent], strlen(phase->params[sent]),
                           &id, failure) < 0) {
                return failure->code;
            }
            sent++;
        }
        if (wire_turn(wire, NULL, -1, failure) < 0 ||
            phase_take_answers(wire, &answered, failure) < 0) {
            return failure->code;
        }
    }
    return 0;
}

static inline void phase_deinit(struct phase *phase)
{
    for (size_t i = 0; i < phase->count; i++) {
        free(phase->params[i]);
    }
    free(phase->params);
}

/* The items from `first` up to `end`: as drafts without their tags to be asked about, or whole to
 * be filed. 0, or -1 without memory. */
static inline int phase_of_items(const struct corpus *corpus, size_t first, size_t end, bool drafts,
                                 struct phase *ret_phase)
{
    struct phase phase = {.method = drafts ? "item.gaps" : "item.file", .window = PHASE_WINDOW};
    phase.params = calloc(end - first + 1, sizeof *phase.params);
    for (size_t i = first; phase.params && i < end; i++) {
        json_t *item = json_copy(corpus->items[i]);
        if (drafts) {
            (void)json_object_del(item, "tags"); /* there or not */
            (void)json_object_del(item, "id");
        }
        char *text = json_dumps(item, JSON_COMPACT);
        json_decref(item);
        if (!text) {
            break;
        }
        phase.params[phase.count++] = text;
    }
    if (phase.count < end - first) {
        phase_deinit(&phase);
        return -1;
    }
    *ret_phase = phase;
    return 0;
}

/* Waits until everything filed is learned; gives the daemon's state. */
static inline int phase_wait_learned(struct wire *wire, struct wire_answer *ret_state,
                                     struct failure *failure)
{
    for (;;) {
        if (wire_call_take(wire, "daemon.state", json_object(), ret_state, failure) < 0) {
            return failure->code;
        }
        if (json_integer_value(json_object_get(ret_state->result, "backlog")) == 0) {
            return 0;
        }
        wire_answer_deinit(ret_state);
    }
}

#endif
