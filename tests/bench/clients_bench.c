/*
 * clients_bench: one corpus filed by several clients at once, each with its share of the items,
 * pipelined; as many requests are under way over all of them as one client would have.
 *
 *   clients_bench SOCKET CORPUS.jsonl CLIENTS
 */
#include <pthread.h>

#include "tests/bench/corpus.h"
#include "tests/bench/phase.h"

enum {
    MOST_CLIENTS = 100
};

/* One client, on a thread of its own. */
struct client {
    pthread_t thread;
    struct wire *wire;
    struct phase phase; /* its items; each is owned by `whole` */
    struct failure failure;
};

static void *file_share(void *user)
{
    struct client *client = user;
    (void)phase_run(client->wire, &client->phase, &client->failure); /* the failure tells */
    return NULL;
}

/* Every so many-th item, beginning with the first, second … for each client. */
static int open_client(const char *path, const struct phase *whole, size_t number, size_t clients,
                       struct client *client, struct failure *failure)
{
    client->phase = (struct phase){.method = whole->method, .window = whole->window / clients};
    client->phase.params = calloc(whole->count / clients + 1, sizeof *client->phase.params);
    if (!client->phase.params) {
        return failure_memory(failure);
    }
    for (size_t i = number; i < whole->count; i += clients) {
        client->phase.params[client->phase.count++] = whole->params[i];
    }
    return wire_open(path, &client->wire, failure);
}

/* Runs all clients and waits for them; the first failure is kept. */
static void run_clients(struct client *all, size_t clients, struct failure *failure)
{
    size_t started = 0;
    while (started < clients &&
           pthread_create(&all[started].thread, NULL, file_share, &all[started]) == 0) {
        started++;
    }
    for (size_t i = 0; i < started; i++) {
        (void)pthread_join(all[i].thread, NULL); /* fails only for a wrong thread */
        if (failure->code == 0) {
            *failure = all[i].failure;
        }
    }
    if (started < clients) {
        (void)failure_memory(failure);
    }
}

static int measure(const char *path, const struct phase *whole, struct client *all, size_t clients,
                   struct failure *failure)
{
    struct wire_answer state = {0};
    for (size_t i = 0; i < clients; i++) {
        if (open_client(path, whole, i, clients, &all[i], failure) < 0) {
            return failure->code;
        }
    }
    double begun = bench_now_s();
    run_clients(all, clients, failure);
    double filed = bench_now_s();
    if (failure->code != 0 || phase_wait_learned(all[0].wire, &state, failure) < 0) {
        return failure->code;
    }
    printf("{\"filed_per_s\": %.0f, \"learned_per_s\": %.0f}\n",
           (double)whole->count / (filed - begun), (double)whole->count / (bench_now_s() - begun));
    wire_answer_deinit(&state);
    return 0;
}

int main(int argc, char **argv)
{
    static struct client all[MOST_CLIENTS];
    struct corpus corpus;
    struct phase whole = {0};
    struct failure failure = {0};
    size_t clients = argc == 4 ? (size_t)strtoul(argv[3], NULL, 10) : 0;
    if (clients < 1 || clients > MOST_CLIENTS) {
        (void)fprintf(stderr, "usage: clients_bench SOCKET CORPUS.jsonl CLIENTS (1 to 100)\n");
        return EXIT_FAILURE;
    }
    if (corpus_read(argv[2], &corpus) < 0) {
        return EXIT_FAILURE;
    }
    if (phase_of_items(&corpus, 0, corpus.learned, false, &whole) < 0) {
        (void)failure_memory(&failure);
    } else {
        (void)measure(argv[1], &whole, all, clients, &failure); /* the failure tells */
    }
    if (failure.code != 0) {
        (void)fprintf(stderr, "clients_bench: %s\n", failure.message);
    }
    for (size_t i = 0; i < clients; i++) {
        wire_free(all[i].wire);
        free(all[i].phase.params);
    }
    phase_deinit(&whole);
    corpus_free(&corpus);
    return failure.code != 0 ? EXIT_FAILURE : EXIT_SUCCESS;
}
