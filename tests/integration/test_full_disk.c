/*
 * No room: nothing is changed, the daemon lives and answers, and goes on once there is room again.
 * A map that is full and a reserve that is not there stand for a disk that is full.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "tests/integration/filling.h"
#include "tests/integration/logbook.h"
#include "tests/integration/program.h"
#include "tests/integration/service.h"

enum {
    STORE = -32005
};

static int set_up_small_map(void **state)
{
    *state = service_new("map_size=16MiB", "flush_every_ms=10", NULL);
    return 0;
}

/* --- a map that is full ---------------------------------------------------------------------- */

static void a_filing_that_does_not_fit_changes_nothing(void **state)
{
    struct service *service = *state;
    unsigned refused = filling_fill(&service->peer);
    assert_true(refused > 10);
    assert_int_equal(ask_seq(&service->peer), refused);
    assert_error(ask_refused(&service->peer, "item.show", "{'id': 'entry %u'}", refused), -32001,
                 "/id");
    assert_int_equal(whole(ask(&service->peer, "tag.show", "{'tag': 'fog'}"), "count"), refused);
}

static void a_full_store_still_answers(void **state)
{
    struct service *service = *state;
    struct peer *peer = &service->peer;
    unsigned refused = filling_fill(peer);
    assert_int_equal(whole(ask(peer, "item.show", "{'id': 'entry %u'}", refused - 1), "seq"),
                     refused);
    assert_int_equal(json_array_size(json_object_get(ask(peer, "item.list", "{}"), "items")),
                     refused);
    wait_until_learned(peer);
    (void)ask(peer, "item.gaps", "{'id': 'entry 0'}");
    const json_t *faults = json_object_get(ask(peer, "daemon.state", "{}"), "faults");
    assert_int_equal(json_array_size(faults), 1);
    assert_non_null(strstr(json_string_value(json_array_get(faults, 0)), "map_size"));
}

static int set_up_long_texts(void **state)
{
    *state = service_new("map_size=16MiB", "text_limit=64MiB", "line_limit=64MiB");
    return 0;
}

/* Sent together they are committed together, were it not for the one in the middle. */
static void what_does_not_fit_does_not_take_others_with_it(void **state)
{
    struct service *service = *state;
    struct peer *peer = &service->peer;
    char *text = filling_text((size_t)17 * 1024 * 1024);
    unsigned before = peer_request(peer, "item.file", "{'id': 'before', 'tags': ['fog']}");
    (void)peer_request(peer, "item.file", "{'id': 'large', 'text': '%s', 'tags': ['bell']}", text);
    (void)peer_request(peer, "item.file", "{'id': 'after', 'tags': ['fog']}");
    free(text);
    assert_int_equal(whole(peer_result(peer, before), "seq"), 1);
    assert_error(peer_error(peer, before + 1), STORE, "");
    assert_int_equal(whole(peer_result(peer, before + 2), "seq"), 2);
    assert_error(ask_refused(peer, "tag.show", "{'tag': 'bell'}"), -32001, "/tag");
}

/* 3 times 30 texts of 200 KiB are 17.6 MiB, of which 6 MiB are there at a time. */
static void what_was_withdrawn_makes_room(void **state)
{
    struct service *service = *state;
    struct peer *peer = &service->peer;
    char *text = filling_text(FILLING_BYTES);
    for (unsigned round = 0; round < 3; round++) {
        for (unsigned i = 0; i < 30; i++) {
            (void)ask(peer, "item.file", "{'id': '%u', 'text': '%s', 'tags': ['fog']}", i, text);
        }
        for (unsigned i = 0; i < 30; i++) {
            (void)ask(peer, "item.withdraw", "{'id': '%u'}", i);
        }
        wait_until_learned(peer); /* the journal keeps them until then */
    }
    free(text);
    assert_int_equal(ask_seq(peer), 3 * 60);
    assert_json(json_object_get(ask(peer, "daemon.state", "{}"), "faults"), "[]");
}

static void a_full_store_opens_again(void **state)
{
    struct service *service = *state;
    unsigned refused = filling_fill(&service->peer);
    wait_until_learned(&service->peer);
    service_stop_and_start(service);
    assert_int_equal(ask_seq(&service->peer), refused);
    assert_int_equal(ask_learned(&service->peer), refused);
    service->daemon.settings[0] = "map_size=32MiB"; /* what the sentence advises */
    service_stop_and_start(service);
    char *text = filling_text(FILLING_BYTES);
    for (unsigned i = 0; i < 20; i++) {
        (void)ask(&service->peer, "item.file", "{'id': 'new %u', 'text': '%s', 'tags': []}", i,
                  text);
    }
    free(text);
    assert_int_equal(ask_seq(&service->peer), refused + 20);
}

/* --- a reserve that is not there ------------------------------------------------------------- */

/* 1 TiB, the most that the option takes, of which no test machine has that much left. */
static int set_up_reserve(void **state)
{
    struct service *service = service_new("disk_reserve=0", NULL, NULL);
    (void)ask(&service->peer, "item.file", "{'id': 'a', 'text': 'dense fog', 'tags': ['fog']}");
    service->daemon.settings[0] = "disk_reserve=1024GiB";
    service_stop_and_start(service);
    *state = service;
    return 0;
}

static void below_the_reserve_nothing_is_changed(void **state)
{
    struct service *service = *state;
    struct peer *peer = &service->peer;
    const json_t *error = ask_refused(peer, "item.file", "{'id': 'b', 'tags': ['bell']}");
    assert_error(error, STORE, "");
    assert_non_null(strstr(string(error, "message"), "disk_reserve"));
    assert_error(ask_refused(peer, "item.withdraw", "{'id': 'a'}"), STORE, "");
    assert_int_equal(ask_seq(peer), 1);
    assert_string_equal(string(ask(peer, "item.show", "{'id': 'a'}"), "text"), "dense fog");
    assert_error(ask_refused(peer, "tag.show", "{'tag': 'bell'}"), -32001, "/tag");
}

static void below_the_reserve_the_same_is_still_the_same(void **state)
{
    struct service *service = *state;
    assert_json(
        ask(&service->peer, "item.file", "{'id': 'a', 'text': 'dense fog', 'tags': ['fog']}"),
        "{'seq': 1, 'was': 'same'}");
}

static void the_client_ends_with_try_again(void **state)
{
    struct service *service = *state;
    static struct program_run run;
    program_run("undertag",
                (const char *const[]){"--socket", service->daemon.socket, "file", "--id", "b",
                                      "--tag", "bell", NULL},
                "a night of bells", &run);
    assert_int_equal(run.exit_code, 75);
    assert_non_null(strstr(run.error, "disk_reserve"));
}

/* --- a model that cannot be stored ----------------------------------------------------------- */

enum {
    ENTRIES = 2000,
    WORDS = 60 /* most of them in no other entry: more than 64 MiB have room for unstored */
};

/* What was filed with memory for all of it is to be learned again with little, and no room. */
static int set_up_unstorable(void **state)
{
    struct service *service =
        service_new("disk_reserve=0", "memory_budget=1GiB", "flush_every_ms=3600000");
    logbook_file(&service->peer, 0, ENTRIES, WORDS);
    undertagd_kill(&service->daemon);
    service->daemon.settings[0] = "disk_reserve=1024GiB";
    service->daemon.settings[1] = "memory_budget=64MiB";
    service_restart(service);
    undertagd_wait_for(&service->daemon, "what was learned cannot be stored");
    *state = service;
    return 0;
}

static void while_the_model_cannot_be_stored_questions_are_answered(void **state)
{
    struct service *service = *state;
    struct peer *peer = &service->peer;
    const json_t *answer = ask(peer, "item.gaps", "{'text': 'dense fog', 'floor': 0}");
    assert_in_range(whole(answer, "learned"), 1, ENTRIES - 1);
    assert_true(json_array_size(json_object_get(answer, "gaps")) > 0);
    const json_t *faults = json_object_get(ask(peer, "daemon.state", "{}"), "faults");
    assert_int_equal(json_array_size(faults), 1);
    assert_non_null(strstr(json_string_value(json_array_get(faults, 0)), "disk_reserve"));
    assert_int_equal(ask_seq(peer), ENTRIES);
}

static void once_the_model_can_be_stored_the_rest_is_learned(void **state)
{
    struct service *service = *state;
    service->daemon.settings[0] = "disk_reserve=0";
    service_stop_and_start(service);
    wait_until_learned(&service->peer);
    assert_int_equal(ask_learned(&service->peer), ENTRIES);
    assert_json(json_object_get(ask(&service->peer, "daemon.state", "{}"), "faults"), "[]");
}

#define TEST_OF_MAP(name) cmocka_unit_test_setup_teardown(name, set_up_small_map, service_tear_down)
#define TEST_OF_RESERVE(name)                                                                      \
    cmocka_unit_test_setup_teardown(name, set_up_reserve, service_tear_down)
#define TEST_OF_MODEL(name)                                                                        \
    cmocka_unit_test_setup_teardown(name, set_up_unstorable, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST_OF_MAP(a_filing_that_does_not_fit_changes_nothing),
        TEST_OF_MAP(a_full_store_still_answers),
        cmocka_unit_test_setup_teardown(what_does_not_fit_does_not_take_others_with_it,
                                        set_up_long_texts, service_tear_down),
        TEST_OF_MAP(what_was_withdrawn_makes_room),
        TEST_OF_MAP(a_full_store_opens_again),
        TEST_OF_RESERVE(below_the_reserve_nothing_is_changed),
        TEST_OF_RESERVE(below_the_reserve_the_same_is_still_the_same),
        TEST_OF_RESERVE(the_client_ends_with_try_again),
        TEST_OF_MODEL(while_the_model_cannot_be_stored_questions_are_answered),
        TEST_OF_MODEL(once_the_model_can_be_stored_the_rest_is_learned),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
