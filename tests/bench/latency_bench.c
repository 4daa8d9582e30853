/*
 * latency_bench: how long a question waits, at a running daemon. The first half of what a corpus
 * has to learn is filed and learned; then drafts are asked about one by one while nothing else
 * happens, and a call that does nothing is made as often; then the same drafts while a second
 * client files the other half as fast as it is taken.
 *
 *   latency_bench SOCKET CORPUS.jsonl
 */
#include <assert.h>
#include <pthread.h>
#include <stdatomic.h>
#include <string.h>

#include "tests/bench/corpus.h"
#include "tests/bench/phase.h"
#include "tests/bench/waits.h"

enum {
    IDLE_CALLS = 4000,
    WARM_CALLS = 200,
    MOST_CALLS = 200000
};

/* The second client. */
struct feeder {
    const char *socket_path;
    const struct phase *phase;
    struct failure failure;
    double seconds;
    atomic_bool done;
};

/* There is at least one. */
static void print_waits(const char *name, struct waits *waits)
{
    printf("\"%s\": {", name);
    waits_print(waits);
    printf("}, ");
}

/* How long until the answer is there; reading it is the client's affair. */
static int call_once(struct wire *wire, const char *method, const char *params, double *ret_seconds,
                     struct failure *failure)
{
    int64_t id = 0;
    size_t answered = 0;
    double begun = bench_now_s();
    if (wire_queue(wire, method, params, strlen(params), &id, failure) < 0) {
        return failure->code;
    }
    while (answered == 0) {
        if (wire_turn(wire, NULL, -1, failure) < 0) {
            return failure->code;
        }
        *ret_seconds = bench_now_s() - begun;
        if (phase_take_answers(wire, &answered, failure) < 0) {
            return failure->code;
        }
    }
    return 0;
}

/* Asks about one draft after the other: `most` times, or until the feeder is done, but once. */
static int ask(struct wire *wire, const struct phase *drafts, size_t most,
               const struct feeder *feeder, struct waits *waits, struct failure *failure)
{
    waits->count = 0;
    size_t at = 0;
    assert(drafts->count > 0);
    do {
        double seconds = 0.0;
        if (call_once(wire, drafts->method, drafts->params[at], &seconds, failure) < 0) {
            return failure->code;
        }
        if (waits_add(waits, seconds) < 0) {
            return failure_memory(failure);
        }
        at = at + 1 < drafts->count ? at + 1 : 0;
    } while (waits->count < most && !(feeder && atomic_load(&feeder->done)));
    return 0;
}

static void *feed(void *user)
{
    struct feeder *feeder = user;
    struct wire *wire = NULL;
    double begun = bench_now_s();
    if (wire_open(feeder->socket_path, &wire, &feeder->failure) == 0) {
        (void)phase_run(wire, feeder->phase, &feeder->failure); /* the failure tells */
    }
    feeder->seconds = bench_now_s() - begun;
    wire_free(wire);
    atomic_store(&feeder->done, true);
    return NULL;
}

static int measure_idle(struct wire *wire, const struct phase *drafts, struct waits *waits,
                        struct failure *failure)
{
    char params[] = "{\"since\":1000000000,\"most\":1}"; /* beyond the last change */
    char *all[] = {params};
    const struct phase nothings = {.method = "item.list", .params = all, .count = 1};
    if (ask(wire, drafts, WARM_CALLS, NULL, waits, failure) < 0 ||
        ask(wire, drafts, IDLE_CALLS, NULL, waits, failure) < 0) {
        return failure->code;
    }
    print_waits("idle", waits);
    if (ask(wire, &nothings, IDLE_CALLS, NULL, waits, failure) < 0) {
        return failure->code;
    }
    print_waits("nothing", waits);
    return 0;
}

static int measure_feeding(struct wire *wire, const struct phase *drafts, struct feeder *feeder,
                           struct waits *waits, struct failure *failure)
{
    pthread_t thread;
    if (pthread_create(&thread, NULL, feed, feeder) != 0) {
        return failure_memory(failure);
    }
    int code = ask(wire, drafts, MOST_CALLS, feeder, waits, failure);
    (void)pthread_join(thread, NULL); /* fails only for a wrong thread */
    if (code == 0 && feeder->failure.code != 0) {
        *failure = feeder->failure;
    }
    if (failure->code == 0) {
        print_waits("feeding", waits);
        printf("\"fed_per_s\": %.0f", (double)feeder->phase->count / feeder->seconds);
    }
    return failure->code;
}

/* Files the first half and waits until it is learned. */
static int prepare(struct wire *wire, const struct phase *first, struct failure *failure)
{
    struct wire_answer state = {0};
    if (phase_run(wire, first, failure) < 0 || phase_wait_learned(wire, &state, failure) < 0) {
        return failure->code;
    }
    wire_answer_deinit(&state);
    return 0;
}

static int measure(struct wire *wire, const char *path, const struct corpus *corpus,
                   struct failure *failure)
{
    struct phase first = {0};
    struct phase second = {0};
    struct phase drafts = {0};
    struct waits waits = {0};
    size_t half = corpus->learned / 2;
    if (phase_of_items(corpus, 0, half, false, &first) < 0 ||
        phase_of_items(corpus, half, corpus->learned, false, &second) < 0 ||
        phase_of_items(corpus, corpus->learned, corpus->count, true, &drafts) < 0) {
        (void)failure_memory(failure);
        goto out;
    }
    struct feeder feeder = {.socket_path = path, .phase = &second};
    printf("{");
    if (prepare(wire, &first, failure) == 0 && measure_idle(wire, &drafts, &waits, failure) == 0) {
        (void)measure_feeding(wire, &drafts, &feeder, &waits, failure); /* the failure tells */
    }
    printf("}\n");
out:
    phase_deinit(&first);
    phase_deinit(&second);
    phase_deinit(&drafts);
    waits_deinit(&waits);
    return failure->code;
}

int main(int argc, char **argv)
{
    struct corpus corpus;
    struct wire *wire = NULL;
    struct failure failure = {0};
    if (argc != 3) {
        (void)fprintf(stderr, "usage: latency_bench SOCKET CORPUS.jsonl\n");
        return EXIT_FAILURE;
    }
    if (corpus_read(argv[2], &corpus) < 0) {
        return EXIT_FAILURE;
    }
    if (wire_open(argv[1], &wire, &failure) == 0) {
        (void)measure(wire, argv[1], &corpus, &failure); /* the failure tells */
    }
    if (failure.code != 0) {
        (void)fprintf(stderr, "latency_bench: %s\n", failure.message);
    }
    wire_free(wire);
    corpus_free(&corpus);
    return failure.code != 0 ? EXIT_FAILURE : EXIT_SUCCESS;
}
