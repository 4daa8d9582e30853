/* The calls of one connection: stopping, abandoning, and how much may wait. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/call_fixture.h"

/* --- stopping --- */

static void stopping_refuses_what_has_not_started(void **state)
{
    struct fixture *fixture = *state;
    ask(fixture, "read", 'a');
    ask(fixture, "change", 'b');
    start(fixture);
    fixture->queue.stopping = true;
    ask(fixture, "read", 'c');
    notify(fixture, "read", 'd');
    start(fixture);
    end(fixture, 'a');
    start(fixture);
    assert_string_equal(fixture->started, "a");
    assert_out(fixture, "a\nb-32006\nc-32006\n");
    assert_true(call_queue_is_empty(&fixture->queue));
}

static void abandoning_forgets_all_but_what_runs(void **state)
{
    struct fixture *fixture = *state;
    ask(fixture, "burn", 'x');
    ask(fixture, "read", 'a');
    ask(fixture, "read", 'b');
    ask(fixture, "change", 'c');
    start(fixture);
    end(fixture, 'b');
    call_queue_abandon(&fixture->queue);
    assert_false(call_queue_is_empty(&fixture->queue));
    start(fixture);
    assert_string_equal(fixture->started, "ab");
    end(fixture, 'a');
    assert_int_equal(fixture->ended, 2);
    call_queue_abandon(&fixture->queue);
    assert_true(call_queue_is_empty(&fixture->queue));
    assert_int_equal(fixture->queue.line_bytes, 0);
    assert_int_equal(fixture->queue.answer_bytes, 0);
}

/* --- limits --- */

/* Lines of 400,000 bytes: the third passes 1 MiB. */
static void there_is_room_until_a_mebibyte_of_lines_waits(void **state)
{
    struct fixture *fixture = *state;
    enum {
        LINE = 400 * 1000
    };
    char *line = malloc(LINE);
    assert_non_null(line);
    memset(line, ' ', LINE);
    static const char REQUEST[] =
        "{\"jsonrpc\":\"2.0\",\"id\":\"a\",\"method\":\"read\",\"params\":{\"name\":\"a\"}}";
    memcpy(line, REQUEST, strlen(REQUEST));
    for (int i = 0; i < 3; i++) {
        assert_true(call_queue_has_room(&fixture->queue));
        call_queue_add_line(&fixture->queue, line, LINE);
    }
    free(line);
    assert_false(call_queue_has_room(&fixture->queue));
    start(fixture);
    for (int i = 0; i < 3; i++) { /* each has taken the name of the one before */
        call_answer_take(fixture->queue.first->state == CALL_RUNNING ? fixture->queue.first
                                                                     : fixture->queue.first->next,
                         json_true());
        assert_out(fixture, "a\n");
        assert_true(call_queue_has_room(&fixture->queue));
    }
}

static void a_batch_leaves_its_room_with_its_last_call(void **state)
{
    struct fixture *fixture = *state;
    add(fixture, BATCH);
    assert_int_equal(fixture->queue.line_bytes, strlen(BATCH));
    start(fixture);
    end(fixture, 'a');
    end(fixture, 'n');
    assert_int_equal(call_queue_collect(&fixture->queue, &fixture->text), 0);
    assert_int_equal(fixture->queue.line_bytes, strlen(BATCH));
    end(fixture, 'b');
    assert_out(fixture, "[ab]\n");
    assert_int_equal(fixture->queue.line_bytes, 0);
}

/* An answer of "echo" is {"jsonrpc":"2.0","id":"a","result":"a"}, 39 bytes. */
static void the_answer_limit_stops_starting(void **state)
{
    struct fixture *fixture = *state;
    ask(fixture, "echo", 'a');
    ask(fixture, "echo", 'b');
    ask(fixture, "echo", 'c');
    call_queue_start(&fixture->queue, 40);
    assert_string_equal(fixture->started, "ab");
    assert_int_equal(fixture->queue.answer_bytes, 78);
    call_queue_start(&fixture->queue, 78);
    assert_string_equal(fixture->started, "ab");
    assert_out(fixture, "a\nb\n");
    call_queue_start(&fixture->queue, 0);
    assert_string_equal(fixture->started, "ab");
    call_queue_start(&fixture->queue, 1);
    assert_string_equal(fixture->started, "abc");
    assert_out(fixture, "c\n");
}

/* Asks for one call more than may run, and sees it start when another has ended. */
static void assert_at_most(struct fixture *fixture, const char *method, int most)
{
    for (int i = 0; i < most + 1; i++) {
        ask(fixture, method, 'a');
    }
    start(fixture);
    assert_int_equal(fixture->start_count, most);
    call_answer_take(fixture->queue.first, json_true());
    start(fixture);
    assert_int_equal(fixture->start_count, most + 1);
    for (struct call *call = fixture->queue.first->next; call; call = call->next) {
        call_answer_take(call, json_true());
    }
}

static void at_most_1024_changes_run_at_a_time(void **state)
{
    assert_at_most(*state, "change", 1024);
}

static void at_most_32_reads_run_at_a_time(void **state)
{
    assert_at_most(*state, "read", 32);
}

/* What is counted in a buffer of the connection stays there: small lines are many calls. */
static void there_is_room_until_2048_calls_wait(void **state)
{
    struct fixture *fixture = *state;
    enum {
        MOST = 2048
    };
    for (int i = 0; i < MOST; i++) {
        assert_true(call_queue_has_room(&fixture->queue));
        ask(fixture, "echo", 'a');
    }
    assert_false(call_queue_has_room(&fixture->queue));
}

/* 64 together: with three others that read, 16 each. */
static void queues_that_read_share_out_what_runs_together(void **state)
{
    struct fixture *fixture = *state;
    struct call_crowd crowd = {.reading = 3};
    fixture->queue.crowd = &crowd;
    assert_at_most(fixture, "read", 16);
    assert_int_equal(crowd.reading, 3); /* it has left */
}

/* However many others there are. */
static void a_queue_may_always_read_something(void **state)
{
    struct fixture *fixture = *state;
    struct call_crowd crowd = {.reading = 1000};
    fixture->queue.crowd = &crowd;
    assert_at_most(fixture, "read", 1);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, calls_set_up, calls_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(stopping_refuses_what_has_not_started),
        TEST(abandoning_forgets_all_but_what_runs),
        TEST(there_is_room_until_a_mebibyte_of_lines_waits),
        TEST(a_batch_leaves_its_room_with_its_last_call),
        TEST(the_answer_limit_stops_starting),
        TEST(at_most_1024_changes_run_at_a_time),
        TEST(at_most_32_reads_run_at_a_time),
        TEST(there_is_room_until_2048_calls_wait),
        TEST(queues_that_read_share_out_what_runs_together),
        TEST(a_queue_may_always_read_something),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
