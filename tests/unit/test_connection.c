/* One peer: its lines, its answers, its limits, and its going away. Every test ends with a loop
 * that closes (server_fixture.h). */
#include "daemon/connection.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/server_fixture.h"

/* --- lines and answers --- */

static void answers_come_back_to_who_asked(void **state)
{
    struct serving *serving = *state;
    join(serving, 0);
    join(serving, 1);
    say(serving, 0, "{'jsonrpc':'2.0','id':1,'method':'echo','params':{'port':'quay'}}\n");
    say(serving, 1, "{'jsonrpc':'2.0','id':2,'method':'echo','params':{'port':'pier'}}\n");
    assert_heard(serving, 1, "{'jsonrpc':'2.0','id':2,'result':{'port':'pier'}}");
    assert_heard(serving, 0, "{'jsonrpc':'2.0','id':1,'result':{'port':'quay'}}");
}

static void a_request_may_come_in_pieces(void **state)
{
    struct serving *serving = *state;
    static const char LINE[] = "{'jsonrpc':'2.0','id':1,'method':'echo','params':{}}\r\n";
    join(serving, 0);
    wait_until_connections(serving, 1);
    for (size_t i = 0; LINE[i]; i++) {
        const char piece[] = {LINE[i], '\0'};
        say(serving, 0, piece);
        (void)uv_run(&serving->loop, UV_RUN_NOWAIT);
    }
    assert_heard(serving, 0, "{'jsonrpc':'2.0','id':1,'result':{}}");
}

static void empty_lines_are_passed_over(void **state)
{
    struct serving *serving = *state;
    join(serving, 0);
    say(serving, 0, "\n\r\n\n");
    ask(serving, 0, 1, "echo");
    assert_heard(serving, 0, "{'jsonrpc':'2.0','id':1,'result':{'bytes':100000}}");
}

static void pipelined_answers_keep_the_order_of_the_requests(void **state)
{
    struct serving *serving = *state;
    join(serving, 0);
    ask(serving, 0, 1, "hold");
    ask(serving, 0, 2, "echo");
    ask(serving, 0, 3, "hold");
    wait_until_held(serving, 2);
    end_held(serving, 1);
    end_held(serving, 0);
    assert_heard(serving, 0, "{'jsonrpc':'2.0','id':1,'result':0}");
    assert_heard(serving, 0, "{'jsonrpc':'2.0','id':2,'result':{'bytes':100000}}");
    assert_heard(serving, 0, "{'jsonrpc':'2.0','id':3,'result':1}");
}

static void a_peer_that_waits_holds_up_nobody_else(void **state)
{
    struct serving *serving = *state;
    join(serving, 0);
    join(serving, 1);
    ask(serving, 0, 1, "hold");
    wait_until_held(serving, 1);
    ask(serving, 1, 2, "change");
    wait_until_held(serving, 2);
    end_held(serving, 1);
    assert_heard(serving, 1, "{'jsonrpc':'2.0','id':2,'result':1}");
}

/* --- limits --- */

static void one_connection_too_many_is_told_and_closed(void **state)
{
    struct serving *serving = *state;
    serving->settings.connections_limit = 2;
    serve(serving);
    join(serving, 0);
    join(serving, 1);
    wait_until_connections(serving, 2);
    join(serving, 2);
    assert_heard_error(serving, 2, 0, -32003);
    assert_non_null(strstr(serving->line, "There are 2 connections open already"));
    assert_null(hear(serving, 2));
    leave(serving, 2);
    ask(serving, 0, 1, "echo"); /* the others go on */
    assert_non_null(hear(serving, 0));
    leave(serving, 0);
    wait_until_connections(serving, 1);
    join(serving, 0);
    ask(serving, 0, 1, "echo");
    assert_heard(serving, 0, "{'jsonrpc':'2.0','id':1,'result':{'bytes':100000}}");
}

static void a_long_line_is_refused_once_and_the_connection_lives_on(void **state)
{
    struct serving *serving = *state;
    char long_line[300];
    serving->settings.line_limit_bytes = 100;
    serve(serving);
    join(serving, 0);
    memset(long_line, 'x', sizeof long_line);
    say_bytes(serving, 0, long_line, sizeof long_line);
    say(serving, 0, "\n{'jsonrpc':'2.0','id':1,'method':'echo'}\n");
    assert_heard_error(serving, 0, 0, -32003);
    assert_non_null(strstr(serving->line, "longer than line_limit (100 bytes)"));
    assert_heard(serving, 0, "{'jsonrpc':'2.0','id':1,'result':{}}");
}

/* Answers of 100,000 bytes to a peer that does not read: some lie in the socket, up to 1 MiB with
 * the server, and the rest of the calls has not started. */
static void calls_wait_while_answers_wait_unread(void **state)
{
    struct serving *serving = *state;
    join(serving, 0);
    for (int i = 0; i < 100; i++) {
        ask(serving, 0, i + 1, "big");
    }
    for (int i = 0; i < 1000; i++) {
        (void)uv_run(&serving->loop, UV_RUN_NOWAIT);
    }
    assert_true(serving->started >= 10); /* a mebibyte holds ten of them */
    assert_true(serving->started < 50);
    for (int i = 0; i < 100; i++) {
        const char *line = hear(serving, 0);
        char id[16];
        (void)snprintf(id, sizeof id, "\"id\":%d,", i + 1);
        assert_non_null(line);
        assert_true(strlen(line) > 100000);
        assert_non_null(strstr(line, id));
    }
    assert_int_equal(serving->started, 100);
}

/* How many bytes of `most` the server takes, the socket's own room included. */
static size_t say_as_much_as_is_taken(struct serving *serving, int client, size_t most)
{
    static const char NOTHING[65536];
    size_t taken = 0;
    for (int idle = 0; idle < 1000 && taken < most; idle++) {
        ssize_t count = write(serving->clients[client], NOTHING, sizeof NOTHING);
        if (count > 0) {
            taken += (size_t)count;
            idle = 0;
        }
        (void)uv_run(&serving->loop, UV_RUN_NOWAIT);
    }
    return taken;
}

static void a_peer_that_does_not_read_is_not_read_from(void **state)
{
    struct serving *serving = *state;
    enum {
        MOST = 6 * 1024 * 1024 /* below the limit of a line, so that the server would hold it */
    };
    join(serving, 0);
    join(serving, 1);
    for (int i = 0; i < 100; i++) {
        ask(serving, 0, i + 1, "big");
    }
    for (int i = 0; i < 1000; i++) {
        (void)uv_run(&serving->loop, UV_RUN_NOWAIT);
    }
    assert_true(say_as_much_as_is_taken(serving, 0, MOST) < MOST / 2);
    assert_true(say_as_much_as_is_taken(serving, 1, MOST) >= MOST); /* nobody else notices */
}

/* The long line fills the queue, and what follows it in the same read stays in the buffer. A
 * notification gives no answer whose sending would have the server look there again. */
static void a_request_behind_a_long_notification_is_not_forgotten(void **state)
{
    struct serving *serving = *state;
    enum {
        BLANKS = 1200 * 1000
    };
    char *blanks = malloc(BLANKS);
    assert_non_null(blanks);
    memset(blanks, ' ', BLANKS);
    join(serving, 0);
    say_bytes(serving, 0, blanks, BLANKS);
    free(blanks);
    for (int i = 0; i < 1000; i++) {
        (void)uv_run(&serving->loop, UV_RUN_NOWAIT); /* until all of it was read */
    }
    say(serving, 0,
        "{'jsonrpc':'2.0','method':'burn'}\n{'jsonrpc':'2.0','id':1,'method':'echo'}\n");
    assert_heard(serving, 0, "{'jsonrpc':'2.0','id':1,'result':{}}");
}

/* --- going away --- */

static void a_peer_that_has_said_all_still_gets_its_answers(void **state)
{
    struct serving *serving = *state;
    join(serving, 0);
    ask(serving, 0, 1, "hold");
    ask(serving, 0, 2, "change");
    assert_int_equal(shutdown(serving->clients[0], SHUT_WR), 0);
    wait_until_held(serving, 1);
    end_held(serving, 0);
    wait_until_held(serving, 2);
    end_held(serving, 1);
    assert_heard(serving, 0, "{'jsonrpc':'2.0','id':1,'result':0}");
    assert_heard(serving, 0, "{'jsonrpc':'2.0','id':2,'result':1}");
    assert_null(hear(serving, 0));
    wait_until_connections(serving, 0);
}

static void a_peer_may_go_while_its_call_runs(void **state)
{
    struct serving *serving = *state;
    join(serving, 0);
    ask(serving, 0, 1, "hold");
    ask(serving, 0, 2, "change"); /* waits, and is never to be started */
    wait_until_held(serving, 1);
    leave(serving, 0);
    for (int i = 0; i < 100; i++) {
        (void)uv_run(&serving->loop, UV_RUN_NOWAIT);
    }
    assert_int_equal(server_connections(serving->server), 1); /* the call is still its */
    end_held(serving, 0);
    while (server_connections(serving->server) > 0) {
        if (serving->held_count > 1 && serving->held[1]) {
            end_held(serving, 1); /* started before the peer was known to be gone */
        }
        turn(serving);
    }
}

static void a_peer_may_go_with_its_answers_unread(void **state)
{
    struct serving *serving = *state;
    join(serving, 0);
    for (int i = 0; i < 40; i++) {
        ask(serving, 0, i + 1, "big");
    }
    while (serving->started < 5) {
        turn(serving);
    }
    leave(serving, 0);
    wait_until_connections(serving, 0);
}

static void half_a_line_at_the_end_is_no_request(void **state)
{
    struct serving *serving = *state;
    join(serving, 0);
    say(serving, 0, "{'jsonrpc':'2.0','id':1,'method':'echo'}");
    assert_int_equal(shutdown(serving->clients[0], SHUT_WR), 0);
    assert_null(hear(serving, 0));
    assert_int_equal(serving->started, 0);
}

/* A call that runs ends unheard, and only then is the server gone. */
static void a_call_may_outlast_its_peer_and_the_drain(void **state)
{
    struct serving *serving = *state;
    serving->settings.drain_ms = 1;
    serve(serving);
    join(serving, 0);
    ask(serving, 0, 1, "hold");
    wait_until_held(serving, 1);
    drain(serving);
    assert_null(hear(serving, 0)); /* the time is over */
    for (int i = 0; i < 100; i++) {
        (void)uv_run(&serving->loop, UV_RUN_NOWAIT);
    }
    assert_int_equal(serving->drained, 0);
    end_held(serving, 0);
    wait_until_drained(serving);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        SERVING_TEST(answers_come_back_to_who_asked),
        SERVING_TEST(a_request_may_come_in_pieces),
        SERVING_TEST(empty_lines_are_passed_over),
        SERVING_TEST(pipelined_answers_keep_the_order_of_the_requests),
        SERVING_TEST(a_peer_that_waits_holds_up_nobody_else),
        QUIET_TEST(one_connection_too_many_is_told_and_closed),
        QUIET_TEST(a_long_line_is_refused_once_and_the_connection_lives_on),
        SERVING_TEST(calls_wait_while_answers_wait_unread),
        SERVING_TEST(a_peer_that_does_not_read_is_not_read_from),
        SERVING_TEST(a_request_behind_a_long_notification_is_not_forgotten),
        SERVING_TEST(a_peer_that_has_said_all_still_gets_its_answers),
        SERVING_TEST(a_peer_may_go_while_its_call_runs),
        SERVING_TEST(a_peer_may_go_with_its_answers_unread),
        SERVING_TEST(half_a_line_at_the_end_is_no_request),
        QUIET_TEST(a_call_may_outlast_its_peer_and_the_drain),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
