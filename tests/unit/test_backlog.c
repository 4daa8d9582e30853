/*
 * Who waits for whom, and for how long. A change's cost has no unit; the trainer is taken to do
 * 2,000,000 of it a second until that is measured, and may be behind by 0.4 of the promised time:
 * with a promise of one second there is room for 800,000.
 */
#include "daemon/backlog.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/waiter.h"

enum {
    ROOM = 800 * 1000,
    GUARD_S = 120 /* a test that waits for what never comes ends */
};

struct fixture {
    struct backlog *backlog;
    struct waiter waiter;
    uint64_t now_ms;   /* for those who ask for the promise */
    uint64_t returned; /* what a thread that waited was told */
};

static void renew(struct fixture *fixture, struct backlog_start start)
{
    backlog_free(fixture->backlog);
    fixture->backlog = NULL;
    assert_int_equal(backlog_new(&start, &fixture->backlog), 0);
}

static int set_up(void **state)
{
    static struct fixture fixture;
    fixture = (struct fixture){0};
    (void)alarm(GUARD_S);
    renew(&fixture, (struct backlog_start){.visible_within_ms = 1000});
    *state = &fixture;
    return 0;
}

static int tear_down(void **state)
{
    struct fixture *fixture = *state;
    backlog_free(fixture->backlog);
    return 0;
}

static void wait_for_room(void *user)
{
    struct fixture *fixture = user;
    fixture->returned = backlog_wait_for_room(fixture->backlog);
}

static void wait_for_promise(void *user)
{
    struct fixture *fixture = user;
    backlog_wait_for_promise(fixture->backlog, fixture->now_ms);
}

/* For longer than any test runs. */
static void wait_for_work(void *user)
{
    struct fixture *fixture = user;
    fixture->returned = backlog_wait_for_work(fixture->backlog, 0, 3600 * 1000);
}

/* --- numbers --- */

static void what_was_found_at_the_start_is_told(void **state)
{
    struct fixture *fixture = *state;
    renew(fixture, (struct backlog_start){.committed = 12, .learned = 7});
    struct backlog_numbers numbers = backlog_read(fixture->backlog);
    assert_int_equal(numbers.committed, 12);
    assert_int_equal(numbers.learned, 7);
    assert_int_equal(numbers.kept, 7); /* what was learned was in the stored model */
}

static void each_number_moves_on_its_own(void **state)
{
    struct fixture *fixture = *state;
    backlog_committed(fixture->backlog, 5, 100, 0);
    backlog_learned(fixture->backlog, 3, 60, 0);
    backlog_kept(fixture->backlog, 2);
    struct backlog_numbers numbers = backlog_read(fixture->backlog);
    assert_int_equal(numbers.committed, 5);
    assert_int_equal(numbers.learned, 3);
    assert_int_equal(numbers.kept, 2);
}

static void a_nudge_ends_one_wait_for_work(void **state)
{
    struct fixture *fixture = *state;
    waiter_start(&fixture->waiter, wait_for_work, fixture);
    assert_waits(&fixture->waiter);
    backlog_nudge(fixture->backlog);
    waiter_join(&fixture->waiter);
    assert_int_equal(fixture->returned, 0); /* there is no work */
    waiter_start(&fixture->waiter, wait_for_work, fixture);
    assert_waits(&fixture->waiter); /* the next is a wait again */
    backlog_stop(fixture->backlog);
    waiter_join(&fixture->waiter);
}

static void a_nudge_before_the_wait_is_not_lost(void **state)
{
    struct fixture *fixture = *state;
    backlog_nudge(fixture->backlog);
    wait_for_work(fixture);
    assert_int_equal(fixture->returned, 0);
}

static void more_text_and_more_tags_cost_more(void **state)
{
    (void)state;
    assert_true(backlog_cost(0, 0) > 0);
    assert_true(backlog_cost(1000, 0) > backlog_cost(0, 0));
    assert_true(backlog_cost(0, 3) > backlog_cost(0, 2));
}

/* --- room --- */

static void there_is_room_for_a_part_of_the_promised_time(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(backlog_wait_for_room(fixture->backlog), ROOM);
    backlog_committed(fixture->backlog, 1, 300 * 1000, 0);
    assert_int_equal(backlog_wait_for_room(fixture->backlog), ROOM - 300 * 1000);
}

static void what_is_learned_makes_room(void **state)
{
    struct fixture *fixture = *state;
    backlog_committed(fixture->backlog, 3, 700 * 1000, 0);
    backlog_learned(fixture->backlog, 1, 200 * 1000, 0);
    assert_int_equal(backlog_wait_for_room(fixture->backlog), ROOM - 500 * 1000);
}

/* Costs are guesses: once everything is learned nothing is behind, whatever they said. */
static void all_learned_is_all_the_room(void **state)
{
    struct fixture *fixture = *state;
    backlog_committed(fixture->backlog, 1, 700 * 1000, 0);
    backlog_learned(fixture->backlog, 1, 1, 0);
    assert_int_equal(backlog_wait_for_room(fixture->backlog), ROOM);
}

static void a_short_promise_leaves_room_for_some_short_items(void **state)
{
    struct fixture *fixture = *state;
    renew(fixture, (struct backlog_start){.visible_within_ms = 0});
    assert_int_equal(backlog_wait_for_room(fixture->backlog), 100 * 1000);
}

/* 300,000 in 0.25 s are 1,200,000 a second, of which 0.4 s are 480,000; 0.25 s are long enough to
 * forget the first guess altogether. Half as long, 100,000 in 0.125 s, are 800,000 a second and
 * count half: 1,000,000, and 400,000 of room. */
static void the_room_follows_the_rate_that_is_measured(void **state)
{
    struct fixture *fixture = *state;
    backlog_committed(fixture->backlog, 1, 300 * 1000, 0);
    backlog_learned(fixture->backlog, 1, 300 * 1000, 250 * 1000);
    assert_int_equal(backlog_wait_for_room(fixture->backlog), 480 * 1000);
    backlog_committed(fixture->backlog, 2, 100 * 1000, 0);
    backlog_learned(fixture->backlog, 2, 100 * 1000, 125 * 1000);
    assert_int_equal(backlog_wait_for_room(fixture->backlog), 400 * 1000);
}

static void the_writer_waits_until_the_trainer_is_nearer(void **state)
{
    struct fixture *fixture = *state;
    backlog_committed(fixture->backlog, 2, ROOM, 0);
    waiter_start(&fixture->waiter, wait_for_room, fixture);
    assert_waits(&fixture->waiter);
    backlog_kept(fixture->backlog, 1); /* not what it waits for */
    assert_waits(&fixture->waiter);
    backlog_learned(fixture->backlog, 1, 150 * 1000, 0);
    waiter_join(&fixture->waiter);
    assert_int_equal(fixture->returned, 150 * 1000);
}

static void the_writer_waits_for_an_eighth_of_the_room(void **state)
{
    struct fixture *fixture = *state;
    backlog_committed(fixture->backlog, 3, ROOM, 0);
    waiter_start(&fixture->waiter, wait_for_room, fixture);
    backlog_learned(fixture->backlog, 1, ROOM / 8 - 1, 0);
    assert_waits(&fixture->waiter);
    backlog_learned(fixture->backlog, 2, 1, 0);
    waiter_join(&fixture->waiter);
    assert_int_equal(fixture->returned, ROOM / 8);
}

/* --- the backlog of a start --- */

/* The least room is 100,000; half of what is learned comes on top. */
static void while_it_catches_up_half_of_what_is_learned_may_come(void **state)
{
    struct fixture *fixture = *state;
    renew(fixture, (struct backlog_start){.committed = 10, .learned = 4, .visible_within_ms = 0});
    assert_int_equal(backlog_wait_for_room(fixture->backlog), 100 * 1000);
    backlog_committed(fixture->backlog, 11, 90 * 1000, 0);
    assert_int_equal(backlog_wait_for_room(fixture->backlog), 10 * 1000);
    backlog_learned(fixture->backlog, 5, 6 * 1000, 0);
    assert_int_equal(backlog_wait_for_room(fixture->backlog), 13 * 1000);
}

static void what_comes_while_it_catches_up_is_not_promised(void **state)
{
    struct fixture *fixture = *state;
    renew(fixture,
          (struct backlog_start){.committed = 10, .learned = 4, .visible_within_ms = 1000});
    backlog_committed(fixture->backlog, 11, 300 * 1000, 0);
    backlog_learned(fixture->backlog, 10, 77 * 1000, 0);
    backlog_wait_for_promise(fixture->backlog, 1000 * 1000);
}

static void once_it_has_caught_up_what_comes_is_promised(void **state)
{
    struct fixture *fixture = *state;
    renew(fixture,
          (struct backlog_start){.committed = 10, .learned = 4, .visible_within_ms = 1000});
    backlog_committed(fixture->backlog, 11, 1000, 0);
    backlog_learned(fixture->backlog, 11, 77 * 1000, 0);
    backlog_committed(fixture->backlog, 12, 300 * 1000, 0);
    assert_int_equal(backlog_wait_for_room(fixture->backlog), ROOM - 300 * 1000);
    fixture->now_ms = 1000;
    waiter_start(&fixture->waiter, wait_for_promise, fixture);
    assert_waits(&fixture->waiter);
    backlog_learned(fixture->backlog, 12, 300 * 1000, 0);
    waiter_join(&fixture->waiter);
}

/* --- the promise --- */

static void what_was_committed_just_now_is_not_waited_for(void **state)
{
    struct fixture *fixture = *state;
    backlog_committed(fixture->backlog, 1, 100, 5000);
    backlog_wait_for_promise(fixture->backlog, 5999);
}

static void what_was_committed_a_second_ago_is_waited_for(void **state)
{
    struct fixture *fixture = *state;
    backlog_committed(fixture->backlog, 2, 100, 5000);
    backlog_committed(fixture->backlog, 3, 100, 5001);
    fixture->now_ms = 6000;
    waiter_start(&fixture->waiter, wait_for_promise, fixture);
    assert_waits(&fixture->waiter);
    backlog_learned(fixture->backlog, 1, 50, 0);
    assert_waits(&fixture->waiter);
    backlog_learned(fixture->backlog, 2, 50, 0); /* the third is not due */
    waiter_join(&fixture->waiter);
}

static void what_is_learned_is_not_waited_for(void **state)
{
    struct fixture *fixture = *state;
    backlog_committed(fixture->backlog, 1, 100, 5000);
    backlog_learned(fixture->backlog, 1, 100, 0);
    backlog_wait_for_promise(fixture->backlog, 1000 * 1000);
}

/* 256 commits are remembered one by one; the 257th is taken to be as old as the one before it. */
static void more_commits_than_are_remembered_are_promised_all_the_same(void **state)
{
    struct fixture *fixture = *state;
    for (uint64_t i = 1; i <= 257; i++) {
        backlog_committed(fixture->backlog, i, 1, i);
    }
    backlog_learned(fixture->backlog, 255, 255, 0);
    backlog_wait_for_promise(fixture->backlog, 1000 + 255);
    fixture->now_ms = 1000 + 256;
    waiter_start(&fixture->waiter, wait_for_promise, fixture);
    assert_waits(&fixture->waiter);
    backlog_learned(fixture->backlog, 256, 1, 0);
    assert_waits(&fixture->waiter);
    backlog_learned(fixture->backlog, 257, 1, 0);
    waiter_join(&fixture->waiter);
}

/* --- work --- */

static void work_that_is_there_is_not_waited_for(void **state)
{
    struct fixture *fixture = *state;
    backlog_committed(fixture->backlog, 9, 100, 0);
    assert_int_equal(backlog_wait_for_work(fixture->backlog, 8, 3600 * 1000), 9);
}

static void time_that_is_over_ends_the_wait_for_work(void **state)
{
    struct fixture *fixture = *state;
    backlog_committed(fixture->backlog, 9, 100, 0);
    assert_int_equal(backlog_wait_for_work(fixture->backlog, 9, 0), 9);
}

static void the_trainer_waits_for_work(void **state)
{
    struct fixture *fixture = *state;
    waiter_start(&fixture->waiter, wait_for_work, fixture);
    assert_waits(&fixture->waiter);
    backlog_committed(fixture->backlog, 4, 100, 0);
    waiter_join(&fixture->waiter);
    assert_int_equal(fixture->returned, 4);
}

/* --- for the watchdog --- */

static enum heart look_twice(struct fixture *fixture)
{
    struct heartbeat_watch watch = {0};
    (void)heartbeat_look(backlog_heartbeat(fixture->backlog), &watch);
    return heartbeat_look(backlog_heartbeat(fixture->backlog), &watch);
}

static void whoever_waits_here_does_not_stand_still_until_there_is_work(void **state)
{
    struct fixture *fixture = *state;
    waiter_start(&fixture->waiter, wait_for_work, fixture);
    assert_waits(&fixture->waiter);
    assert_int_equal(look_twice(fixture), HEART_COUNT);
    backlog_nudge(fixture->backlog);
    waiter_join(&fixture->waiter);
    assert_int_equal(look_twice(fixture), HEART_TRAINER);
}

static void a_writer_that_waits_for_the_trainer_does_not_stand_still(void **state)
{
    struct fixture *fixture = *state;
    backlog_committed(fixture->backlog, 2, ROOM, 0);
    assert_int_equal(look_twice(fixture), HEART_WRITER);
    waiter_start(&fixture->waiter, wait_for_room, fixture);
    assert_waits(&fixture->waiter);
    assert_int_equal(look_twice(fixture), HEART_COUNT);
    backlog_stop(fixture->backlog);
    waiter_join(&fixture->waiter);
}

/* --- the end of learning --- */

static void a_failed_trainer_opens_the_gate(void **state)
{
    struct fixture *fixture = *state;
    backlog_committed(fixture->backlog, 2, ROOM, 0);
    waiter_start(&fixture->waiter, wait_for_room, fixture);
    assert_waits(&fixture->waiter);
    backlog_trainer_failed(fixture->backlog);
    waiter_join(&fixture->waiter);
    assert_true(fixture->returned == UINT64_MAX);
    assert_true(backlog_wait_for_room(fixture->backlog) == UINT64_MAX);
}

static void a_failed_trainer_is_not_asked_to_keep_the_promise(void **state)
{
    struct fixture *fixture = *state;
    backlog_committed(fixture->backlog, 2, 100, 0);
    fixture->now_ms = 1000;
    waiter_start(&fixture->waiter, wait_for_promise, fixture);
    assert_waits(&fixture->waiter);
    backlog_trainer_failed(fixture->backlog);
    waiter_join(&fixture->waiter);
    backlog_wait_for_promise(fixture->backlog, 1000);
}

/* --- learning that waits --- */

static void while_learning_waits_the_gate_is_open_and_no_longer(void **state)
{
    struct fixture *fixture = *state;
    backlog_committed(fixture->backlog, 2, ROOM, 0);
    waiter_start(&fixture->waiter, wait_for_room, fixture);
    assert_waits(&fixture->waiter);
    backlog_trainer_waits(fixture->backlog, true);
    waiter_join(&fixture->waiter);
    assert_true(fixture->returned == UINT64_MAX);
    backlog_committed(fixture->backlog, 3, ROOM, 0);
    assert_true(backlog_wait_for_room(fixture->backlog) == UINT64_MAX);
    backlog_trainer_waits(fixture->backlog, false);
    waiter_start(&fixture->waiter, wait_for_room, fixture);
    assert_waits(&fixture->waiter);
    backlog_learned(fixture->backlog, 2, ROOM, 0); /* the third fills the room again */
    assert_waits(&fixture->waiter);
    backlog_learned(fixture->backlog, 3, ROOM, 0);
    waiter_join(&fixture->waiter);
    assert_int_equal(fixture->returned, ROOM);
}

static void while_learning_waits_the_promise_is_not_waited_for(void **state)
{
    struct fixture *fixture = *state;
    backlog_committed(fixture->backlog, 2, 100, 0);
    fixture->now_ms = 1000;
    waiter_start(&fixture->waiter, wait_for_promise, fixture);
    assert_waits(&fixture->waiter);
    backlog_trainer_waits(fixture->backlog, true);
    waiter_join(&fixture->waiter);
    backlog_wait_for_promise(fixture->backlog, 1000);
    backlog_trainer_waits(fixture->backlog, false);
    waiter_start(&fixture->waiter, wait_for_promise, fixture);
    assert_waits(&fixture->waiter);
    backlog_learned(fixture->backlog, 2, 100, 0);
    waiter_join(&fixture->waiter);
}

/* --- stopping --- */

static void stopping_wakes_everybody_and_nobody_waits_again(void **state)
{
    struct fixture *fixture = *state;
    static void (*const WAITS[])(void *user) = {wait_for_room, wait_for_promise, wait_for_promise};
    struct waiter waiters[3];
    backlog_committed(fixture->backlog, 2, ROOM, 0);
    fixture->now_ms = 1000;
    for (size_t i = 0; i < 3; i++) {
        waiter_start(&waiters[i], WAITS[i], fixture);
        assert_waits(&waiters[i]);
    }
    assert_false(backlog_is_stopping(fixture->backlog));
    backlog_stop(fixture->backlog);
    for (size_t i = 0; i < 3; i++) {
        waiter_join(&waiters[i]);
    }
    assert_true(backlog_is_stopping(fixture->backlog));
    assert_int_equal(backlog_wait_for_room(fixture->backlog), 1); /* there must be some */
    backlog_wait_for_promise(fixture->backlog, 1000);
    assert_int_equal(backlog_wait_for_work(fixture->backlog, 2, 3600 * 1000), 2);
}

static void stopping_wakes_the_trainer(void **state)
{
    struct fixture *fixture = *state;
    waiter_start(&fixture->waiter, wait_for_work, fixture);
    assert_waits(&fixture->waiter);
    backlog_stop(fixture->backlog);
    waiter_join(&fixture->waiter);
    assert_int_equal(fixture->returned, 0);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(what_was_found_at_the_start_is_told),
        TEST(each_number_moves_on_its_own),
        TEST(a_nudge_ends_one_wait_for_work),
        TEST(a_nudge_before_the_wait_is_not_lost),
        TEST(more_text_and_more_tags_cost_more),
        TEST(there_is_room_for_a_part_of_the_promised_time),
        TEST(what_is_learned_makes_room),
        TEST(all_learned_is_all_the_room),
        TEST(a_short_promise_leaves_room_for_some_short_items),
        TEST(the_room_follows_the_rate_that_is_measured),
        TEST(the_writer_waits_until_the_trainer_is_nearer),
        TEST(the_writer_waits_for_an_eighth_of_the_room),
        TEST(while_it_catches_up_half_of_what_is_learned_may_come),
        TEST(what_comes_while_it_catches_up_is_not_promised),
        TEST(once_it_has_caught_up_what_comes_is_promised),
        TEST(what_was_committed_just_now_is_not_waited_for),
        TEST(what_was_committed_a_second_ago_is_waited_for),
        TEST(what_is_learned_is_not_waited_for),
        TEST(more_commits_than_are_remembered_are_promised_all_the_same),
        TEST(work_that_is_there_is_not_waited_for),
        TEST(time_that_is_over_ends_the_wait_for_work),
        TEST(the_trainer_waits_for_work),
        TEST(whoever_waits_here_does_not_stand_still_until_there_is_work),
        TEST(a_writer_that_waits_for_the_trainer_does_not_stand_still),
        TEST(a_failed_trainer_opens_the_gate),
        TEST(a_failed_trainer_is_not_asked_to_keep_the_promise),
        TEST(while_learning_waits_the_gate_is_open_and_no_longer),
        TEST(while_learning_waits_the_promise_is_not_waited_for),
        TEST(stopping_wakes_everybody_and_nobody_waits_again),
        TEST(stopping_wakes_the_trainer),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
