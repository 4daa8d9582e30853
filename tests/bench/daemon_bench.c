/*
 * daemon_bench: a running daemon through its socket: the first part of a corpus is filed,
 * pipelined, until every filing is acknowledged (durable) and until all is learned; then the rest
 * is asked about, pipelined likewise, and once more one question at a time.
 *
 *   daemon_bench SOCKET CORPUS.jsonl
 */
#include "client/wire.h"
#include "tests/bench/corpus.h"
#include "tests/bench/phase.h"

enum {
    SINGLE_QUESTIONS = 1000
};

static int measure(struct wire *wire, const struct corpus *corpus, struct failure *failure)
{
    struct phase filing;
    struct phase asking;
    struct wire_answer state = {0};
    int code = -1;
    if (phase_of_items(corpus, 0, corpus->learned, false, &filing) < 0) {
        return failure_memory(failure);
    }
    if (phase_of_items(corpus, corpus->learned, corpus->count, true, &asking) < 0) {
        phase_deinit(&filing);
        return failure_memory(failure);
    }
    double begun = bench_now_s();
    if (phase_run(wire, &filing, failure) < 0) {
        goto out;
    }
    double filed = bench_now_s();
    if (phase_wait_learned(wire, &state, failure) < 0) {
        goto out;
    }
    double learned = bench_now_s();
    if (phase_run(wire, &asking, failure) < 0) {
        goto out;
    }
    double asked = bench_now_s();
    struct phase single = asking;
    single.window = 1;
    single.count = asking.count < SINGLE_QUESTIONS ? asking.count : SINGLE_QUESTIONS;
    if (phase_run(wire, &single, failure) < 0) {
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
    phase_deinit(&filing);
    phase_deinit(&asking);
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
