/* The calls of one connection: their order, batches, notifications, and what methods say. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/call_fixture.h"

/* --- order --- */

static void answers_come_in_the_order_of_the_calls(void **state)
{
    struct fixture *fixture = *state;
    ask(fixture, "read", 'a');
    ask(fixture, "read", 'b');
    ask(fixture, "read", 'c');
    start(fixture);
    end(fixture, 'c');
    end(fixture, 'b');
    assert_out(fixture, "");
    end(fixture, 'a');
    assert_out(fixture, "a\nb\nc\n");
    assert_true(call_queue_is_empty(&fixture->queue));
}

static void reads_overlap_reads(void **state)
{
    struct fixture *fixture = *state;
    ask(fixture, "read", 'a');
    ask(fixture, "read", 'b');
    start(fixture);
    assert_string_equal(fixture->started, "ab");
    end(fixture, 'a');
    end(fixture, 'b');
}

static void changes_follow_changes_without_waiting(void **state)
{
    struct fixture *fixture = *state;
    ask(fixture, "change", 'a');
    ask(fixture, "change", 'b');
    start(fixture);
    assert_string_equal(fixture->started, "ab");
    end(fixture, 'a');
    end(fixture, 'b');
}

static void a_read_waits_for_every_change_before_it(void **state)
{
    struct fixture *fixture = *state;
    ask(fixture, "change", 'a');
    ask(fixture, "change", 'b');
    ask(fixture, "read", 'c');
    start(fixture);
    end(fixture, 'b');
    start(fixture);
    assert_string_equal(fixture->started, "ab");
    end(fixture, 'a');
    start(fixture);
    assert_string_equal(fixture->started, "abc");
    end(fixture, 'c');
}

static void a_change_waits_for_every_read_before_it_and_holds_up_those_behind(void **state)
{
    struct fixture *fixture = *state;
    ask(fixture, "read", 'a');
    ask(fixture, "change", 'b');
    ask(fixture, "read", 'c');
    start(fixture);
    assert_string_equal(fixture->started, "a");
    end(fixture, 'a');
    start(fixture);
    assert_string_equal(fixture->started, "ab");
    end(fixture, 'b');
    start(fixture);
    assert_string_equal(fixture->started, "abc");
    end(fixture, 'c');
    assert_out(fixture, "a\nb\nc\n");
}

static void a_fault_takes_its_place_in_the_order(void **state)
{
    struct fixture *fixture = *state;
    ask(fixture, "read", 'a');
    add(fixture, "no JSON");
    ask(fixture, "burn", 'b');
    ask(fixture, "read", 'c');
    start(fixture);
    assert_string_equal(fixture->started, "ac");
    end(fixture, 'c');
    assert_out(fixture, "");
    end(fixture, 'a');
    assert_out(fixture, "a\n-32700\nb-32601\nc\n");
}

static void calls_that_end_as_they_start_are_all_started(void **state)
{
    struct fixture *fixture = *state;
    ask(fixture, "echo", 'a');
    ask(fixture, "change", 'b');
    ask(fixture, "echo", 'c');
    start(fixture);
    assert_string_equal(fixture->started, "ab");
    assert_int_equal(fixture->ended, 1);
    end(fixture, 'b');
    start(fixture);
    assert_string_equal(fixture->started, "abc");
    assert_out(fixture, "a\nb\nc\n");
}

/* --- batches --- */

static void a_batch_comes_out_as_one_line_in_its_place(void **state)
{
    struct fixture *fixture = *state;
    ask(fixture, "read", 'x');
    add(fixture, BATCH);
    ask(fixture, "read", 'y');
    start(fixture);
    assert_string_equal(fixture->started, "xanby");
    end(fixture, 'y');
    end(fixture, 'b');
    end(fixture, 'n');
    end(fixture, 'a');
    end(fixture, 'x');
    assert_out(fixture, "x\n[ab]\ny\n");
}

static void the_pieces_of_a_batch_that_are_collected_early_are_one_line_all_the_same(void **state)
{
    struct fixture *fixture = *state;
    add(fixture, BATCH);
    start(fixture);
    end(fixture, 'a');
    assert_int_equal(call_queue_collect(&fixture->queue, &fixture->text), 0);
    assert_true(fixture->text.size > 0);
    assert_int_equal(fixture->text.bytes[0], '[');
    assert_null(memchr(fixture->text.bytes, '\n', fixture->text.size));
    end(fixture, 'n');
    end(fixture, 'b');
    assert_out(fixture, "[ab]\n");
}

static void a_batch_runs_by_the_same_rules(void **state)
{
    struct fixture *fixture = *state;
    add(fixture, "[{'jsonrpc':'2.0','id':'a','method':'change','params':{'name':'a'}},"
                 "{'jsonrpc':'2.0','id':'b','method':'read','params':{'name':'b'}}]");
    start(fixture);
    assert_string_equal(fixture->started, "a");
    end(fixture, 'a');
    start(fixture);
    assert_string_equal(fixture->started, "ab");
    end(fixture, 'b');
    assert_out(fixture, "[ab]\n");
}

static void two_batches_are_two_lines(void **state)
{
    struct fixture *fixture = *state;
    static const char ONE[] = "[{'jsonrpc':'2.0','id':'a','method':'echo','params':{'name':'a'}}]";
    add(fixture, ONE);
    add(fixture, ONE);
    start(fixture);
    assert_out(fixture, "[a]\n[a]\n");
}

/* --- notifications --- */

static void a_notification_runs_and_gives_nothing(void **state)
{
    struct fixture *fixture = *state;
    notify(fixture, "change", 'a');
    start(fixture);
    assert_string_equal(fixture->started, "a");
    end(fixture, 'a');
    assert_out(fixture, "");
    assert_true(call_queue_is_empty(&fixture->queue));
}

static void a_notification_that_fails_gives_nothing_either(void **state)
{
    struct fixture *fixture = *state;
    struct fault fault = {0};
    notify(fixture, "burn", 'a');
    notify(fixture, "read", 'b');
    start(fixture);
    (void)fault_set(&fault, FAULT_NOT_FOUND, NULL, "There is no such item.");
    call_fail(fixture->calls['b'], &fault);
    assert_out(fixture, "");
    assert_true(call_queue_is_empty(&fixture->queue));
    assert_false(fixture->queue.broken);
}

static void a_batch_of_notifications_gives_nothing(void **state)
{
    struct fixture *fixture = *state;
    add(fixture, "[{'jsonrpc':'2.0','method':'echo','params':{'name':'a'}},"
                 "{'jsonrpc':'2.0','method':'burn'}]");
    ask(fixture, "echo", 'b');
    start(fixture);
    assert_out(fixture, "b\n");
    assert_true(call_queue_is_empty(&fixture->queue));
}

/* --- what a method says --- */

static void a_method_may_fail(void **state)
{
    struct fixture *fixture = *state;
    struct fault fault = {0};
    ask(fixture, "read", 'a');
    start(fixture);
    (void)fault_set(&fault, FAULT_NOT_FOUND, "/id", "There is no such item.");
    call_fail(fixture->calls['a'], &fault);
    assert_int_equal(fixture->ended, 1);
    assert_out(fixture, "a-32001\n");
}

static void an_answer_without_memory_is_an_internal_error(void **state)
{
    struct fixture *fixture = *state;
    ask(fixture, "nothing", 'a');
    start(fixture);
    assert_out(fixture, "a-32603\n");
}

static void a_call_knows_its_peer(void **state)
{
    struct fixture *fixture = *state;
    ask(fixture, "read", 'a');
    start(fixture);
    assert_int_equal(call_uid(fixture->calls['a']), 1911);
    assert_ptr_equal(call_context(fixture->calls['a']), fixture);
    end(fixture, 'a');
}

/* --- rights --- */

/* Nobody may change anything. */
static int allow_reads(void *context, const struct method *method, const struct rights_peer *peer,
                       struct fault *fault)
{
    (void)context;
    return method->right == RIGHT_READ ? 0
                                       : fault_set(fault, FAULT_FORBIDDEN, NULL, "User %u: %s.",
                                                   (unsigned)peer->uid, method->name);
}

static void a_call_that_the_peer_may_not_make_is_refused_in_its_place(void **state)
{
    struct fixture *fixture = *state;
    fixture->table.check = allow_reads;
    ask(fixture, "read", 'a');
    ask(fixture, "change", 'b');
    ask(fixture, "read", 'c');
    start(fixture);
    assert_string_equal(fixture->started, "ac");
    end(fixture, 'c');
    end(fixture, 'a');
    assert_out(fixture, "a\nb-32004\nc\n");
}

static void a_notification_that_the_peer_may_not_send_is_not_obeyed(void **state)
{
    struct fixture *fixture = *state;
    fixture->table.check = allow_reads;
    notify(fixture, "change", 'a');
    start(fixture);
    assert_string_equal(fixture->started, "");
    assert_out(fixture, "");
}

static void each_call_of_a_batch_is_checked(void **state)
{
    struct fixture *fixture = *state;
    fixture->table.check = allow_reads;
    add(fixture, "[{'jsonrpc':'2.0','id':'a','method':'echo','params':{'name':'a'}},"
                 "{'jsonrpc':'2.0','id':'b','method':'change','params':{'name':'b'}}]");
    start(fixture);
    assert_string_equal(fixture->started, "a");
    assert_out(fixture, "[ab-32004]\n");
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, calls_set_up, calls_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(answers_come_in_the_order_of_the_calls),
        TEST(reads_overlap_reads),
        TEST(changes_follow_changes_without_waiting),
        TEST(a_read_waits_for_every_change_before_it),
        TEST(a_change_waits_for_every_read_before_it_and_holds_up_those_behind),
        TEST(a_fault_takes_its_place_in_the_order),
        TEST(calls_that_end_as_they_start_are_all_started),
        TEST(a_batch_comes_out_as_one_line_in_its_place),
        TEST(the_pieces_of_a_batch_that_are_collected_early_are_one_line_all_the_same),
        TEST(a_batch_runs_by_the_same_rules),
        TEST(two_batches_are_two_lines),
        TEST(a_notification_runs_and_gives_nothing),
        TEST(a_notification_that_fails_gives_nothing_either),
        TEST(a_batch_of_notifications_gives_nothing),
        TEST(a_method_may_fail),
        TEST(an_answer_without_memory_is_an_internal_error),
        TEST(a_call_knows_its_peer),
        TEST(a_call_that_the_peer_may_not_make_is_refused_in_its_place),
        TEST(a_notification_that_the_peer_may_not_send_is_not_obeyed),
        TEST(each_call_of_a_batch_is_checked),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
