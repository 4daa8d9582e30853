/*
 * soak_bench: a running daemon under what a long working day brings: one client files invented
 * items as fast as they are taken, a second asks for the gaps of filed items and of drafts, a third
 * rules on gaps, files items anew and withdraws some, a few times a second.
 *
 *   soak_bench SOCKET SECONDS WORDS TAGS
 *
 * What each of them did is counted by equal parts of the time, and how long questions waited. Every
 * WITHDRAWN-th item may be withdrawn and is left alone otherwise, so that an error is never
 * expected.
 */
#include <pthread.h>
#include <stdatomic.h>
#include <string.h>

#include "tests/bench/synthetic_phase.h"
#include "tests/bench/waits.h"

enum {
    SEED = 1911,
    OTHER_SEED = 1927, /* of what takes the place of an item's first text and tags */
    BLOCK = 1000,      /* items made ready at once */
    WINDOW = 256,
    WITHDRAWN = 7,
    PARTS = 10,
    PAUSE_MS = 200
};

struct soak {
    const char *socket_path;
    struct synthetic items;
    struct synthetic others;
    double begun_s;
    double seconds;
    atomic_uint_fast64_t filed; /* items below this number */
    atomic_bool failed;
};

/* One of the clients, on a thread of its own. */
struct hand {
    struct soak *soak;
    int (*work)(struct hand *hand); /* one piece of it; 0, or the failure's code */
    const char *name;
    uint64_t random;
    uint64_t turn;
    uint64_t withdrawn;
    pthread_t thread;
    struct wire *wire;
    struct failure failure;
    uint64_t done[PARTS];
    struct waits waits; /* of questions */
};

static void count_done(struct hand *hand, uint64_t count)
{
    double share = (bench_now_s() - hand->soak->begun_s) / hand->soak->seconds;
    size_t part = (size_t)(share * PARTS);
    hand->done[part < PARTS ? part : PARTS - 1] += count;
}

static void pause_ms(long milliseconds)
{
    const struct timespec span = {.tv_nsec = milliseconds * 1000000L};
    (void)nanosleep(&span, NULL); /* cut short, it is a shorter pause */
}

static int call_take(struct hand *hand, const char *method, json_t *params,
                     struct wire_answer *ret_answer)
{
    return wire_call_take(hand->wire, method, params, ret_answer, &hand->failure);
}

/* The same where nobody looks at the answer. */
static int do_take(struct hand *hand, const char *method, json_t *params)
{
    struct wire_answer answer = {0};
    int code = call_take(hand, method, params, &answer);
    wire_answer_deinit(&answer);
    return code;
}

static json_t *id_of(uint64_t item)
{
    return json_sprintf("s%llu", (unsigned long long)item);
}

/* A filed item that is never withdrawn; there are some. */
static uint64_t any_item(struct hand *hand)
{
    uint64_t item = synthetic_bits(&hand->random) % atomic_load(&hand->soak->filed);
    return item % WITHDRAWN != 0 ? item : item == 0 ? 1 : item - 1;
}

/* An invented item to be changed before it is sent; NULL without memory. */
static json_t *item_object(const struct synthetic *synthetic, uint64_t item)
{
    char *text = synthetic_item(synthetic, item);
    json_t *object = text ? json_loads(text, 0, NULL) : NULL;
    free(text);
    return object;
}

/* --- the three ----------------------------------------------------------------------------------
 */

static int feed(struct hand *hand)
{
    struct phase phase = {0};
    uint64_t first = atomic_load(&hand->soak->filed);
    if (phase_of_synthetic(&hand->soak->items, first, first + BLOCK, &phase) < 0) {
        return failure_memory(&hand->failure);
    }
    phase.window = WINDOW;
    int code = phase_run(hand->wire, &phase, &hand->failure);
    phase_deinit(&phase);
    if (code == 0) {
        atomic_store(&hand->soak->filed, first + BLOCK);
        count_done(hand, BLOCK);
    }
    return code;
}

/* By turns about a filed item and about a draft, which is one that was never filed. */
static int ask(struct hand *hand)
{
    json_t *question = NULL;
    if (hand->turn++ % 2 == 0) {
        question = json_pack("{s:o}", "id", id_of(any_item(hand)));
    } else {
        json_t *draft = item_object(&hand->soak->others, synthetic_bits(&hand->random));
        question = json_pack("{s:O?}", "text", json_object_get(draft, "text"));
        json_decref(draft);
    }
    double begun = bench_now_s();
    int code = do_take(hand, "item.gaps", question);
    if (waits_add(&hand->waits, bench_now_s() - begun) < 0) {
        return failure_memory(&hand->failure);
    }
    count_done(hand, code == 0);
    return code;
}

/* The first gap belongs to the item, the second does not. */
static int rule(struct hand *hand)
{
    struct wire_answer answer = {0};
    uint64_t item = any_item(hand);
    json_t *question = json_pack("{s:o, s:i, s:i}", "id", id_of(item), "most", 2, "floor", 0);
    int code = call_take(hand, "item.gaps", question, &answer);
    json_t *gaps = json_object_get(answer.result, "gaps");
    if (code == 0 && json_array_size(gaps) == 2) {
        json_t *belongs = json_object_get(json_array_get(gaps, 0), "tag");
        json_t *not = json_object_get(json_array_get(gaps, 1), "tag");
        code = do_take(
            hand, "item.rule",
            json_pack("{s:o, s:[O], s:[O]}", "id", id_of(item), "belongs", belongs, "not", not ));
    }
    wire_answer_deinit(&answer);
    return code;
}

static int revise(struct hand *hand)
{
    uint64_t item = any_item(hand);
    json_t *revision = item_object(&hand->soak->others, synthetic_bits(&hand->random));
    (void)json_object_set_new(revision, "id", id_of(item)); /* without memory, it is refused */
    return do_take(hand, "item.file", revision);
}

static int withdraw(struct hand *hand)
{
    if (hand->withdrawn >= atomic_load(&hand->soak->filed)) {
        return 0; /* there is none left */
    }
    uint64_t item = hand->withdrawn;
    hand->withdrawn += WITHDRAWN;
    return do_take(hand, "item.withdraw", json_pack("{s:o}", "id", id_of(item)));
}

static int change(struct hand *hand)
{
    static int (*const ACTIONS[])(struct hand *) = {rule, revise, rule, withdraw};
    pause_ms(PAUSE_MS);
    int code = ACTIONS[hand->turn++ % (sizeof ACTIONS / sizeof ACTIONS[0])](hand);
    count_done(hand, code == 0);
    return code;
}

/* --- together -----------------------------------------------------------------------------------
 */

static bool is_over(const struct soak *soak)
{
    return atomic_load(&soak->failed) || bench_now_s() - soak->begun_s >= soak->seconds;
}

static void *work(void *user)
{
    struct hand *hand = user;
    int code = wire_open(hand->soak->socket_path, &hand->wire, &hand->failure);
    while (code == 0 && !is_over(hand->soak)) {
        if (hand->work != feed && atomic_load(&hand->soak->filed) == 0) {
            pause_ms(PAUSE_MS); /* nothing is there yet */
            continue;
        }
        code = hand->work(hand);
    }
    if (code != 0) {
        atomic_store(&hand->soak->failed, true);
    }
    wire_free(hand->wire);
    return NULL;
}

static void print_done(struct hand *hands, size_t count, const struct soak *soak)
{
    printf("{\"part_s\": %.3f", soak->seconds / PARTS);
    for (size_t i = 0; i < count; i++) {
        printf(", \"%s\": [", hands[i].name);
        for (size_t part = 0; part < PARTS; part++) {
            printf("%s%llu", part ? ", " : "", (unsigned long long)hands[i].done[part]);
        }
        printf("]");
        if (hands[i].waits.count > 0) {
            printf(", \"%s_waits\": {", hands[i].name);
            waits_print(&hands[i].waits);
            printf("}");
        }
    }
    printf("}\n");
}

int main(int argc, char **argv)
{
    if (argc != 5 || strtod(argv[2], NULL) <= 0.0) {
        (void)fprintf(stderr, "usage: soak_bench SOCKET SECONDS WORDS TAGS\n");
        return EXIT_FAILURE;
    }
    struct synthetic items = {.seed = SEED,
                              .words = (uint32_t)strtoul(argv[3], NULL, 10),
                              .tags = (uint32_t)strtoul(argv[4], NULL, 10),
                              .walk = true};
    struct soak soak = {.socket_path = argv[1],
                        .items = items,
                        .others = items,
                        .begun_s = bench_now_s(),
                        .seconds = strtod(argv[2], NULL)};
    soak.others.seed = OTHER_SEED;
    struct hand hands[] = {{.soak = &soak, .work = feed, .name = "filed"},
                           {.soak = &soak, .work = ask, .name = "asked", .random = 1},
                           {.soak = &soak, .work = change, .name = "changed", .random = 2}};
    size_t count = sizeof hands / sizeof hands[0];
    size_t started = 0;
    while (started < count &&
           pthread_create(&hands[started].thread, NULL, work, &hands[started]) == 0) {
        started++;
    }
    atomic_store(&soak.failed, started < count || atomic_load(&soak.failed));
    for (size_t i = 0; i < started; i++) {
        (void)pthread_join(hands[i].thread, NULL); /* fails only for a wrong thread */
        if (hands[i].failure.code != 0) {
            (void)fprintf(stderr, "soak_bench: %s\n", hands[i].failure.message);
        }
    }
    print_done(hands, count, &soak);
    for (size_t i = 0; i < count; i++) {
        waits_deinit(&hands[i].waits);
    }
    return atomic_load(&soak.failed) ? EXIT_FAILURE : EXIT_SUCCESS;
}
