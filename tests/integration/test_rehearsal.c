/*
 * What the daemon does with its idle time: it learns its items some times more, and comes to rest.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <poll.h>
#include <stdlib.h>
#include <string.h>

#include "tests/integration/logbook.h"
#include "tests/integration/service.h"

enum {
    ITEMS = 300,
    PASSES = 3, /* turns that each change brings */
    WORDS = 20,
    ASK_EVERY_MS = 5
};

static json_int_t rehearsal(struct peer *peer, const char *member)
{
    return whole(json_object_get(ask(peer, "daemon.state", "{}"), "rehearsal"), member);
}

/* Asks until so many items have been rehearsed. */
static void wait_until_rehearsed(struct peer *peer, json_int_t items)
{
    for (int waited_ms = 0; rehearsal(peer, "items") < items; waited_ms += ASK_EVERY_MS) {
        if (waited_ms > PATIENCE_MS) {
            fail_msg("%lld of %lld items were rehearsed", (long long)rehearsal(peer, "items"),
                     (long long)items);
        }
        (void)poll(NULL, 0, ASK_EVERY_MS); /* between two questions: rehearsing needs the core */
    }
}

/* Files while nothing is rehearsed, so that every round has all items. */
static int set_up_filed(void **state)
{
    struct service *service = service_new("rehearsal_share=0", NULL, NULL);
    logbook_file(&service->peer, 0, ITEMS, WORDS);
    wait_until_learned(&service->peer);
    *state = service;
    return 0;
}

static void restart_with(struct service *service, const char *setting)
{
    assert_int_equal(undertagd_stop(&service->daemon), 0);
    service->daemon.settings[0] = setting;
    service_restart(service);
}

/* Files one more, and waits until it is learned: the trainer has looked for work since. */
static void file_one_more(struct peer *peer, unsigned number)
{
    logbook_file(peer, number, 1, WORDS);
    wait_until_learned(peer);
}

static void every_item_is_rehearsed_in_each_pass(void **state)
{
    struct service *service = *state;
    assert_int_equal(rehearsal(&service->peer, "due"), PASSES * ITEMS);
    restart_with(service, "rehearsal_share=1");
    wait_until_rehearsed(&service->peer, PASSES * ITEMS);
    assert_int_equal(rehearsal(&service->peer, "items"), PASSES * ITEMS);
    assert_int_equal(rehearsal(&service->peer, "due"), 0);
}

static void then_it_rests_until_something_is_filed(void **state)
{
    struct service *service = *state;
    restart_with(service, "rehearsal_share=1");
    wait_until_rehearsed(&service->peer, PASSES * ITEMS);
    service_stop_and_start(service);
    assert_int_equal(rehearsal(&service->peer, "items"), PASSES * ITEMS);
    file_one_more(&service->peer, ITEMS);
    wait_until_rehearsed(&service->peer, PASSES * (ITEMS + 1));
    assert_int_equal(rehearsal(&service->peer, "items"), PASSES * (ITEMS + 1));
    assert_int_equal(rehearsal(&service->peer, "passes"), PASSES);
    assert_int_equal(rehearsal(&service->peer, "due"), 0);
}

static void filing_goes_on_being_answered_and_learned(void **state)
{
    struct service *service = *state;
    restart_with(service, "rehearsal_share=1");
    for (unsigned i = 0; i < 20; i++) { /* among the rehearsal of the others */
        const json_t *answer = ask(&service->peer, "item.file",
                                   "{'id': 'late %u', 'text': 'dense fog', 'tags': ['fog']}", i);
        assert_string_equal(string(answer, "was"), "new");
        wait_until_learned(&service->peer);
    }
    assert_int_equal(ask_learned(&service->peer), ITEMS + 20);
    wait_until_rehearsed(&service->peer, PASSES * (ITEMS + 20));
    assert_int_equal(rehearsal(&service->peer, "items"), PASSES * (ITEMS + 20));
}

/* Stopped in the middle, it goes on: no turn is had twice. */
static void a_restart_in_the_middle_goes_on(void **state)
{
    struct service *service = *state;
    restart_with(service, "rehearsal_share=1");
    wait_until_rehearsed(&service->peer, 1);
    service_stop_and_start(service);
    assert_true(rehearsal(&service->peer, "items") >= 1);
    wait_until_rehearsed(&service->peer, PASSES * ITEMS);
    assert_int_equal(rehearsal(&service->peer, "items"), PASSES * ITEMS);
}

static void what_was_withdrawn_is_passed_over(void **state)
{
    struct service *service = *state;
    for (unsigned i = 0; i < 10; i++) {
        (void)ask(&service->peer, "item.withdraw", "{'id': 'entry %u'}", 7 * i);
    }
    restart_with(service, "rehearsal_share=1");
    wait_until_rehearsed(&service->peer, PASSES * (ITEMS - 10));
    assert_int_equal(rehearsal(&service->peer, "items"), PASSES * (ITEMS - 10));
    assert_int_equal(rehearsal(&service->peer, "due"), 0);
}

/* Nothing is to do but to wait for work when the later items are learned. */
static void with_a_share_of_0_nothing_is_rehearsed(void **state)
{
    struct service *service = *state;
    for (unsigned i = 0; i < 50; i++) {
        file_one_more(&service->peer, ITEMS + i);
    }
    assert_int_equal(rehearsal(&service->peer, "items"), 0);
    assert_int_equal(rehearsal(&service->peer, "passes"), 0);
}

/* Rehearsal changes what is proposed, not what is known of the items. */
static void counts_and_items_stay_as_they_are(void **state)
{
    struct service *service = *state;
    static const char *const COUNTS[] = {"items", "tags", "words", "seq", "learned"};
    json_int_t before[sizeof COUNTS / sizeof COUNTS[0]];
    for (size_t i = 0; i < sizeof COUNTS / sizeof COUNTS[0]; i++) {
        before[i] = whole(ask(&service->peer, "daemon.state", "{}"), COUNTS[i]);
    }
    const char *tags = text_of(&service->peer, ask(&service->peer, "tag.list", "{}"));
    char *kept = strdup(tags);
    assert_non_null(kept);
    restart_with(service, "rehearsal_share=1");
    wait_until_rehearsed(&service->peer, PASSES * ITEMS);
    for (size_t i = 0; i < sizeof COUNTS / sizeof COUNTS[0]; i++) {
        assert_int_equal(whole(ask(&service->peer, "daemon.state", "{}"), COUNTS[i]), before[i]);
    }
    assert_string_equal(text_of(&service->peer, ask(&service->peer, "tag.list", "{}")), kept);
    free(kept);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up_filed, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(every_item_is_rehearsed_in_each_pass),
        TEST(then_it_rests_until_something_is_filed),
        TEST(filing_goes_on_being_answered_and_learned),
        TEST(a_restart_in_the_middle_goes_on),
        TEST(what_was_withdrawn_is_passed_over),
        TEST(with_a_share_of_0_nothing_is_rehearsed),
        TEST(counts_and_items_stay_as_they_are),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
