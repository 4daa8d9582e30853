/*
 * The model is read from its store when it is wanted: a start loads little of it and changes no
 * answer, and the memory budget bounds what is held of it.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sysexits.h>

#include "tests/integration/logbook.h"
#include "tests/integration/program.h"
#include "tests/integration/service.h"

enum {
    ITEMS = 1200,
    WORDS = 40, /* most of them in no other entry: more than 64 MiB have room for unstored */
    DRAFTS = 20,
    MIB = 1 << 20
};

static json_int_t memory_of(struct peer *peer, const char *member)
{
    return whole(json_object_get(ask(peer, "daemon.state", "{}"), "memory"), member);
}

/* --- answers that are kept ----------------------------------------------------------------------
 */

struct answers {
    char *texts[2 * DRAFTS + 1];
    size_t count;
};

static void keep(struct answers *answers, struct peer *peer, const json_t *answer)
{
    char *text = strdup(text_of(peer, answer));
    assert_non_null(text);
    answers->texts[answers->count++] = text;
}

/* About drafts, filed items and what the daemon knows of itself. */
static struct answers ask_all(struct peer *peer)
{
    struct answers answers = {.count = 0};
    for (unsigned i = 0; i < DRAFTS; i++) {
        char text[12 * WORDS + 1];
        logbook_text(1000000 + i, WORDS, text, sizeof text);
        keep(&answers, peer,
             ask(peer, "item.gaps", "{'text': '%s', 'floor': 0, 'most': 1000, 'why': true}", text));
        keep(&answers, peer,
             ask(peer, "item.gaps", "{'id': 'entry %u', 'floor': 0, 'most': 1000, 'why': true}",
                 31 * i));
    }
    keep(&answers, peer, ask(peer, "desk.standing", "{}"));
    return answers;
}

/* Frees both. */
static void assert_same_answers(struct answers *one, struct answers *other)
{
    assert_int_equal(one->count, other->count);
    for (size_t i = 0; i < one->count; i++) {
        assert_string_equal(one->texts[i], other->texts[i]);
        free(one->texts[i]);
        free(other->texts[i]);
    }
    one->count = 0;
    other->count = 0;
}

/* --- a restart ----------------------------------------------------------------------------------
 */

static void a_restart_answers_at_once_what_it_answered_before(void **state)
{
    struct service *service = *state;
    logbook_file(&service->peer, 0, ITEMS, WORDS);
    wait_until_learned(&service->peer);
    struct answers before = ask_all(&service->peer);
    assert_non_null(strstr(before.texts[0], "\"gaps\":[{"));
    service_stop_and_start(service);
    struct answers after = ask_all(&service->peer);
    assert_int_equal(ask_learned(&service->peer), ITEMS); /* nothing was learned again */
    assert_true(undertagd_said(&service->daemon, "ready: "));
    assert_false(undertagd_said(&service->daemon, "learned again"));
    assert_same_answers(&before, &after);
}

/* Questions read what they want and hold none of it; learning holds what it has changed. */
static void a_restart_loads_no_weights_until_it_learns(void **state)
{
    struct service *service = *state;
    logbook_file(&service->peer, 0, ITEMS, WORDS);
    wait_until_learned(&service->peer);
    json_int_t full = memory_of(&service->peer, "weights");
    json_int_t words = memory_of(&service->peer, "dictionary");
    service_stop_and_start(service);
    json_int_t fresh = memory_of(&service->peer, "weights");
    assert_true(fresh < full / 10);
    assert_true(memory_of(&service->peer, "dictionary") < words / 10);
    (void)ask(&service->peer, "item.gaps", "{'text': 'dense fog on the reef', 'floor': 0}");
    assert_int_equal(memory_of(&service->peer, "weights"), fresh);
    logbook_file(&service->peer, ITEMS, 1, WORDS);
    wait_until_learned(&service->peer);
    assert_true(memory_of(&service->peer, "weights") > fresh);
    assert_true(memory_of(&service->peer, "weights") < full / 2);
}

/* What is not loaded is counted all the same. */
static void a_restart_knows_how_much_it_has_learned(void **state)
{
    static const char *const COUNTS[] = {"items", "tags", "words", "weights", "learned"};
    enum {
        COUNT = sizeof COUNTS / sizeof COUNTS[0]
    };
    struct service *service = *state;
    json_int_t counts[COUNT];
    logbook_file(&service->peer, 0, 100, WORDS);
    wait_until_learned(&service->peer);
    const json_t *before = ask(&service->peer, "daemon.state", "{}");
    for (size_t i = 0; i < COUNT; i++) {
        counts[i] = whole(before, COUNTS[i]);
        assert_true(counts[i] > 0);
    }
    service_stop_and_start(service);
    const json_t *after = ask(&service->peer, "daemon.state", "{}");
    for (size_t i = 0; i < COUNT; i++) {
        assert_int_equal(whole(after, COUNTS[i]), counts[i]);
    }
}

/* --- the budget ---------------------------------------------------------------------------------
 */

/* So that it is memory that has the model stored, if anything. */
static const char SELDOM[] = "flush_every_ms=3600000";

static int set_up_least_budget(void **state)
{
    *state = service_new("memory_budget=64MiB", SELDOM, NULL);
    return 0;
}

static void with_the_least_budget_answers_are_those_of_a_large_one(void **state)
{
    struct service *service = *state;
    struct service *large = service_new("memory_budget=4GiB", SELDOM, NULL);
    logbook_file(&service->peer, 0, ITEMS, WORDS);
    logbook_file(&large->peer, 0, ITEMS, WORDS);
    wait_until_learned(&service->peer);
    wait_until_learned(&large->peer);
    wait_until_model_takes(&service->peer, 2 * ask_model_bytes(&large->peer));
    struct answers one = ask_all(&service->peer);
    struct answers other = ask_all(&large->peer);
    assert_same_answers(&one, &other);
    void *state_of_large = large;
    assert_int_equal(service_tear_down(&state_of_large), 0);
}

static void the_budget_and_what_asking_takes_are_told(void **state)
{
    struct service *service = *state;
    assert_int_equal(memory_of(&service->peer, "budget"), 64 * MIB);
    logbook_file(&service->peer, 0, 10, WORDS);
    (void)ask(&service->peer, "item.gaps", "{'text': 'dense fog', 'floor': 0}");
    assert_true(memory_of(&service->peer, "asking") > 0);
    assert_true(memory_of(&service->peer, "asking") < 64 * MIB);
}

static struct program_run run;

/* Runs undertagd, which does not come to listen, with an option; its exit code. */
static int try_budget(const char *option)
{
    program_run("undertagd", (const char *const[]){"--check-config", "--set", option, NULL}, "",
                &run);
    return run.exit_code;
}

static void a_budget_below_the_least_is_refused_by_name(void **state)
{
    (void)state;
    static const char *const OPTIONS[] = {"memory_budget=67108863", "memory_budget=63MiB",
                                          "memory_budget=0", "memory_budget=2TiB"};
    for (size_t i = 0; i < sizeof OPTIONS / sizeof OPTIONS[0]; i++) {
        assert_int_equal(try_budget(OPTIONS[i]), EX_CONFIG);
        assert_non_null(strstr(run.error, "memory_budget"));
        assert_non_null(strstr(run.error, "64"));
        assert_ptr_equal(strchr(run.error, '\n'), run.error + strlen(run.error) - 1); /* one line */
    }
    assert_int_equal(try_budget("memory_budget=64MiB"), 0);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, service_set_up, service_tear_down)
#define TEST_OF_LITTLE(name)                                                                       \
    cmocka_unit_test_setup_teardown(name, set_up_least_budget, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_restart_answers_at_once_what_it_answered_before),
        TEST(a_restart_loads_no_weights_until_it_learns),
        TEST(a_restart_knows_how_much_it_has_learned),
        TEST_OF_LITTLE(with_the_least_budget_answers_are_those_of_a_large_one),
        TEST_OF_LITTLE(the_budget_and_what_asking_takes_are_told),
        cmocka_unit_test(a_budget_below_the_least_is_refused_by_name),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
