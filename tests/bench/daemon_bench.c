/*
 * daemon_bench: a running daemon through its socket: the first part of a corpus is filed,
 * pipelined, until every filing is acknowledged (durable) and until all is learned; then the rest
 * is asked about, pipelined likewise, and once more one question at a time.
 *
 *   daemon_bench SOCKET CORPUS.jsonl
 */
#include <string.h>

#include "client/wire.h"
#include "tests/bench/corpus.h"

enum {
    WINDOW = 2048,
    SINGLE_QUESTIONS = 1000
};

/* The requests of one phase, ready made, so that making them is not measured. */
struct phase {
    const char *method;
    char **params;
    size_t count;
    size_t window;
};

static int take_answers(struct wire *wire, size_t *answered, struct failure *failure)
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

static int run_phase(struct wire *wire, const struct phase *phase, struct failure *failure)
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
        if (wire_turn(wire, NULL, -1, failure) < 0 || take_answers(wire, &answered, failure) < 0) {
            return failure->code;
        }
    }
    return 0;
}

static void free_phase(struct phase *phase)
{
    for (size_t i = 0; i < phase->count; i++) {
        free(phase->params[i]);
    }
    free(phase->params);
}

/* A phase of the items from `first` up to `end`; as drafts without their tags, or whole. */
static int make_phase(const struct corpus *corpus, size_t first, size_t end, bool drafts,
                      struct phase *ret_phase)
{
    struct phase phase = {.method = drafts ? "item.gaps" : "item.file", .window = WINDOW};
    phase.params = calloc(end - first, sizeof *phase.params);
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
        free_phase(&phase);
        return -1;
    }
    *ret_phase = phase;
    return 0;
}

/* Waits until everything filed is learned; gives the daemon's state. */
static int wait_learned(struct wire *wire, struct wire_answer *ret_state, struct failure *failure)
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

static int measure(struct wire *wire, const struct corpus *corpus, struct failure *failure)
{
    struct phase filing;
    struct phase asking;
    struct wire_answer state = {0};
    int code = -1;
    if (make_phase(corpus, 0, corpus->learned, false, &filing) < 0) {
        return failure_memory(failure);
    }
    if (make_phase(corpus, corpus->learned, corpus->count, true, &asking) < 0) {
        free_phase(&filing);
        return failure_memory(failure);
    }
    double begun = bench_now_s();
    if (run_phase(wire, &filing, failure) < 0) {
        goto out;
    }
    double filed = bench_now_s();
    if (wait_learned(wire, &state, failure) < 0) {
        goto out;
    }
    double learned = bench_now_s();
    if (run_phase(wire, &asking, failure) < 0) {
        goto out;
    }
    double asked = bench_now_s();
    struct phase single = asking;
    single.window = 1;
    single.count = asking.count < SINGLE_QUESTIONS ? asking.count : SINGLE_QUESTIONS;
    if (run_phase(wire, &single, failure) < 0) {
        goto out;
    }
    double asked_singly = bench_now_s();
    const json_t *memory = json_object_get(state.result, "memory");
    printf("{\"filed_per_s\": %.0f, \"learned_per_s\": %.0f, \"questions_per_s\": %.0f, "
           "\"single_questions_per_s\": %.0f, \"weights\": %lld, \"memory_bytes\": %lld}\n",
           (double)filing.count / (filed - begun), (double)filing.count / (learned - begun),
           (double)asking.count / (asked - learned), (double)single.count / (asked_singly - asked),
           (long long)json_integer_value(json_object_get(state.result, "weights")),
           (long long)json_integer_value(json_object_get(memory, "resident")));
    code = 0;
out:
    wire_answer_deinit(&state);
    free_phase(&filing);
    free_phase(&asking);
    return code;
}

int main(int argc, char **argv)
{
    struct corpus corpus;
    struct wire *wire = NULL;
    struct failure failure = {0};
    if (argc != 3) {
        (void)fprintf(stderr, "usage: daemon_bench SOCKET CORPUS.jsonl\n");
        return EXIT_FAILURE;
    }
    if (corpus_read(argv[2], &corpus) < 0) {
        return EXIT_FAILURE;
    }
    if (wire_open(argv[1], &wire, &failure) == 0) {
        (void)measure(wire, &corpus, &failure); /* the failure tells */
    }
    if (failure.code != 0) {
        (void)fprintf(stderr, "daemon_bench: %s\n", failure.message);
    }
    wire_free(wire);
    corpus_free(&corpus);
    return failure.code != 0 ? EXIT_FAILURE : EXIT_SUCCESS;
}
