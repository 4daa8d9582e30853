/*
 * What is learned is a function of the sequence of changes alone: however often the daemon was
 * killed, whenever it stored its model, and however little memory it had, the stored weights have
 * the same checksum. One feeder, so that the sequence is fixed: change k gets seq k.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdlib.h>

#include "tests/integration/logbook.h"
#include "tests/integration/service.h"
#include "tests/integration/weights_checksum.h"

enum {
    CHANGES = 1600,
    WINDOW = 32, /* changes under way */
    WORDS = 60,  /* most of them in no other entry: more than 64 MiB have room for unstored */
    TEXT_BYTES = 12 * WORDS + 1
};

/* --- the sequence ---------------------------------------------------------------------------- */

/* Of eight changes one withdraws the entry filed before it, and one revises an older one. */
static void send_change(struct peer *peer, unsigned k)
{
    char text[TEXT_BYTES];
    char tags[LOGBOOK_TAGS_BYTES];
    if (k % 8 == 4) {
        (void)peer_request(peer, "item.withdraw", "{'id': 'entry %u'}", k - 1);
        return;
    }
    logbook_text(k, WORDS, text, sizeof text);
    logbook_tags(k, tags);
    (void)peer_request(peer, "item.file", "{'id': 'entry %u', 'text': '%s', 'tags': %s}",
                       k % 8 == 0 ? k / 2 : k, text, tags);
}

/* The changes behind `before`, up to `last`, of which `wanted` are waited for. */
struct stretch {
    unsigned before;
    unsigned last;
    unsigned wanted;
};

static void feed(struct peer *peer, struct stretch stretch)
{
    unsigned first_id = peer->last_id + 1;
    unsigned sent = stretch.before;
    for (unsigned k = stretch.before + 1; k <= stretch.wanted; k++) {
        while (sent < stretch.last && sent < k + WINDOW) {
            send_change(peer, ++sent);
        }
        const json_t *result = peer_result(peer, first_id + (k - stretch.before - 1));
        assert_int_equal(whole(result, "seq"), k);
    }
}

static void feed_up_to_the_end(struct service *service, unsigned before)
{
    feed(&service->peer, (struct stretch){.before = before, .last = CHANGES, .wanted = CHANGES});
}

/* Ends the daemon, which has learned all of it. */
static uint64_t stop_and_sum(struct service *service)
{
    wait_until_learned(&service->peer);
    assert_int_equal(ask_learned(&service->peer), CHANGES);
    assert_int_equal(undertagd_stop(&service->daemon), 0);
    return weights_checksum(service->daemon.home);
}

/* The checksum of a daemon with these options that nothing happens to. */
static uint64_t sum_of(const char *first, const char *second)
{
    void *state = service_new(first, second, NULL);
    feed_up_to_the_end(state, 0);
    uint64_t sum = stop_and_sum(state);
    assert_int_equal(service_tear_down(&state), 0);
    return sum;
}

static uint64_t undisturbed; /* the checksum that all others are held against */

static int learn_undisturbed(void **state)
{
    (void)state;
    undisturbed = sum_of(NULL, NULL);
    return 0;
}

/* --- nothing happens ------------------------------------------------------------------------- */

static void the_same_stream_gives_the_same_weights(void **state)
{
    (void)state;
    assert_true(sum_of(NULL, NULL) == undisturbed);
}

/* Or all other tests here would be worth nothing: one weight that has moved shows. */
static void one_entry_filed_again_gives_other_weights(void **state)
{
    struct service *service = *state;
    feed_up_to_the_end(service, 0);
    (void)ask(&service->peer, "item.file", "{'id': 'late', 'text': 'fog', 'tags': ['fog']}");
    (void)ask(&service->peer, "item.withdraw", "{'id': 'late'}");
    wait_until_learned(&service->peer);
    assert_int_equal(undertagd_stop(&service->daemon), 0);
    assert_true(weights_checksum(service->daemon.home) != undisturbed);
}

/* --- kill -9 --------------------------------------------------------------------------------- */

/* Feeds until so many changes are acknowledged, with more under way, and kills. Returns the seq
 * that the daemon comes back with. */
static unsigned feed_and_kill(struct service *service, unsigned before, unsigned acknowledged)
{
    feed(&service->peer,
         (struct stretch){.before = before, .last = CHANGES, .wanted = before + acknowledged});
    undertagd_kill(&service->daemon);
    service_restart(service);
    unsigned seq = (unsigned)ask_seq(&service->peer);
    assert_in_range(seq, before + acknowledged, CHANGES);
    return seq;
}

static void kill_now(struct service *service)
{
    undertagd_kill(&service->daemon);
    service_restart(service);
}

/* In the feed, as soon as it is back, while it learns again, and with everything learned. */
static void feed_and_kill_often(struct service *service)
{
    static const unsigned MOMENTS[] = {1, 40, 7, 90, 60};
    unsigned seq = 0;
    for (size_t i = 0; i < sizeof MOMENTS / sizeof MOMENTS[0]; i++) {
        seq = feed_and_kill(service, seq, MOMENTS[i]);
    }
    kill_now(service);
    wait_until_learned(&service->peer);
    kill_now(service);
    feed_up_to_the_end(service, seq);
    kill_now(service);
}

static int set_up_often_stored(void **state)
{
    *state = service_new("flush_every_ms=10", "flush_changes=1", NULL);
    return 0;
}

static int set_up_seldom_stored(void **state)
{
    *state = service_new("flush_every_ms=3600000", "flush_changes=1000000", NULL);
    return 0;
}

static void killed_often_it_goes_on_from_what_was_stored_to_the_same_weights(void **state)
{
    struct service *service = *state;
    feed_and_kill_often(service);
    assert_true(stop_and_sum(service) == undisturbed);
}

static void killed_often_with_nothing_stored_it_learns_the_same_weights_again(void **state)
{
    struct service *service = *state;
    feed_and_kill_often(service);
    assert_true(stop_and_sum(service) == undisturbed);
}

/* --- when it is stored ----------------------------------------------------------------------- */

static void stored_after_each_change_the_weights_are_the_same(void **state)
{
    (void)state;
    assert_true(sum_of("flush_every_ms=10", "flush_changes=1") == undisturbed);
}

/* --- memory ---------------------------------------------------------------------------------- */

/* With nothing but memory to have the model stored: little of it has, much has not. */
static void with_little_memory_the_weights_are_those_of_much(void **state)
{
    static const char SELDOM[] = "flush_every_ms=3600000";
    static const char *const BUDGETS[] = {"memory_budget=1GiB", "memory_budget=64MiB"};
    (void)state;
    json_int_t unstored = 0; /* bytes of a model of which nothing is */
    for (size_t i = 0; i < 2; i++) {
        void *made = service_new(BUDGETS[i], SELDOM, NULL);
        struct service *service = made;
        feed_up_to_the_end(service, 0);
        wait_until_learned(&service->peer);
        if (i == 0) {
            unstored = ask_model_bytes(&service->peer);
        } else {
            wait_until_model_takes(&service->peer, 2 * unstored);
        }
        assert_true(stop_and_sum(service) == undisturbed);
        assert_int_equal(service_tear_down(&made), 0);
    }
}

#define TEST_OF(name, set_up) cmocka_unit_test_setup_teardown(name, set_up, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_same_stream_gives_the_same_weights),
        TEST_OF(one_entry_filed_again_gives_other_weights, service_set_up),
        TEST_OF(killed_often_it_goes_on_from_what_was_stored_to_the_same_weights,
                set_up_often_stored),
        TEST_OF(killed_often_with_nothing_stored_it_learns_the_same_weights_again,
                set_up_seldom_stored),
        cmocka_unit_test(stored_after_each_change_the_weights_are_the_same),
        cmocka_unit_test(with_little_memory_the_weights_are_those_of_much),
    };
    return cmocka_run_group_tests_name("the same weights", tests, learn_undisturbed, NULL);
}
