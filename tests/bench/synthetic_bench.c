/*
 * synthetic_bench: a running daemon gets the invented items from FIRST up to END, pipelined, until
 * every filing is acknowledged and all is learned; then it is asked about some that come later, to
 * see that there was something to learn.
 *
 *   synthetic_bench SOCKET FIRST END WORDS TAGS walk|grow|fill
 *
 * `fill` makes many weights in little time: items of many words that few others have.
 */
#include <string.h>

#include "tests/bench/synthetic_phase.h"

enum {
    SEED = 1911,
    QUESTIONS = 500,
    FILL_WORDS = 200 /* of an item */
};

static bool has_tag(const json_t *tags, const json_t *tag)
{
    for (size_t i = 0; i < json_array_size(tags); i++) {
        if (json_equal(json_array_get(tags, i), tag)) {
            return true;
        }
    }
    return false;
}

/* Asks for the first gap of an item without its tags; 1 where it is one of them. */
static int ask_one(struct wire *wire, const char *params, struct failure *failure)
{
    json_t *item = json_loads(params, 0, NULL);
    json_t *draft =
        json_pack("{s:O?, s:i, s:i}", "text", json_object_get(item, "text"), "most", 1, "floor", 0);
    struct wire_answer answer = {0};
    int hit = -1;
    if (wire_call_take(wire, "item.gaps", draft, &answer, failure) == 0) {
        const json_t *gap = json_array_get(json_object_get(answer.result, "gaps"), 0);
        hit = has_tag(json_object_get(item, "tags"), json_object_get(gap, "tag"));
    }
    wire_answer_deinit(&answer);
    json_decref(item);
    return hit;
}

/* The share of later items of which the first gap is one of their tags; below 0 on failure. */
static double first_right(struct wire *wire, const struct synthetic *synthetic, uint64_t end,
                          struct failure *failure)
{
    struct phase later = {0};
    int hits = 0;
    if (phase_of_synthetic(synthetic, end, end + QUESTIONS, &later) < 0) {
        return failure_memory(failure);
    }
    for (size_t i = 0; i < later.count && failure->code == 0; i++) {
        hits += ask_one(wire, later.params[i], failure) == 1;
    }
    phase_deinit(&later);
    return failure->code != 0 ? -1.0 : (double)hits / QUESTIONS;
}

static int measure(struct wire *wire, const struct synthetic *synthetic, uint64_t first,
                   uint64_t end, struct failure *failure)
{
    struct phase filing = {0};
    struct wire_answer state = {0};
    if (phase_of_synthetic(synthetic, first, end, &filing) < 0) {
        return failure_memory(failure);
    }
    double begun = bench_now_s();
    if (phase_run(wire, &filing, failure) == 0) {
        double filed = bench_now_s();
        if (phase_wait_learned(wire, &state, failure) == 0) {
            double learned = bench_now_s();
            double right = first_right(wire, synthetic, end, failure);
            printf("{\"filed_s\": %.6f, \"learned_s\": %.6f, \"first_right\": %.4f, "
                   "\"state\": %.*s}\n",
                   filed - begun, learned - begun, right, (int)state.result_text_length,
                   state.result_text);
        }
    }
    wire_answer_deinit(&state);
    phase_deinit(&filing);
    return failure->code;
}

int main(int argc, char **argv)
{
    struct wire *wire = NULL;
    struct failure failure = {0};
    if (argc != 7) {
        (void)fprintf(stderr,
                      "usage: synthetic_bench SOCKET FIRST END WORDS TAGS walk|grow|fill\n");
        return EXIT_FAILURE;
    }
    bool fill = strcmp(argv[6], "fill") == 0;
    const struct synthetic synthetic = {.seed = SEED,
                                        .words = (uint32_t)strtoul(argv[4], NULL, 10),
                                        .tags = (uint32_t)strtoul(argv[5], NULL, 10),
                                        .walk = fill || strcmp(argv[6], "walk") == 0,
                                        .flat = fill,
                                        .empty_words = fill ? FILL_WORDS : 0};
    if (wire_open(argv[1], &wire, &failure) == 0) {
        (void)measure(wire, &synthetic, strtoull(argv[2], NULL, 10), strtoull(argv[3], NULL, 10),
                      &failure); /* the failure tells */
    }
    if (failure.code != 0) {
        (void)fprintf(stderr, "synthetic_bench: %s\n", failure.message);
    }
    wire_free(wire);
    return failure.code != 0 ? EXIT_FAILURE : EXIT_SUCCESS;
}
