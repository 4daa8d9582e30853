/* What a peer may keep: a line that does not end, answers that it does not read, a place for
 * nothing, more memory than its share. Whoever keeps too much goes; the others are served. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <errno.h>
#include <unistd.h>

#include "tests/unit/server_fixture.h"

enum {
    SHORT_MS = 50
};

static void assert_served(struct serving *serving, int client)
{
    say(serving, client, "{'jsonrpc':'2.0','id':77,'method':'echo'}\n");
    assert_heard(serving, client, "{'jsonrpc':'2.0','id':77,'result':{}}");
}

/* A line without an end, until the server wants no more of it. */
static void say_until_closed(struct serving *serving, int client)
{
    static const char BLANKS[65536];
    ssize_t count = 0;
    while (count >= 0 || errno == EAGAIN) {
        count = write(serving->clients[client], BLANKS, sizeof BLANKS);
        turn(serving);
    }
    assert_int_equal(errno, EPIPE);
}

static void a_line_that_does_not_end_is_told_and_its_peer_closed(void **state)
{
    struct serving *serving = *state;
    serving->settings.stalled_ms = SHORT_MS;
    serve(serving);
    join(serving, 0);
    join(serving, 1);
    say(serving, 0, "{'jsonrpc':'2.0',");
    assert_heard_error(serving, 0, 0, -32003);
    assert_non_null(strstr(serving->line, "did not end within stalled_ms (50)"));
    assert_null(hear(serving, 0));
    wait_until_connections(serving, 1);
    assert_served(serving, 1);
}

static void a_whole_line_may_be_followed_by_silence(void **state)
{
    struct serving *serving = *state;
    serving->settings.stalled_ms = SHORT_MS;
    serve(serving);
    join(serving, 0);
    join(serving, 1);
    assert_served(serving, 0);
    say(serving, 1, "{'jsonrpc':'2.0',"); /* its end says that the time has passed */
    assert_heard_error(serving, 1, 0, -32003);
    assert_served(serving, 0);
}

static void a_peer_that_reads_no_answers_is_closed(void **state)
{
    struct serving *serving = *state;
    serving->settings.stalled_ms = SHORT_MS;
    serve(serving);
    join(serving, 0);
    join(serving, 1);
    for (int i = 0; i < 100; i++) {
        ask(serving, 0, i + 1, "big");
    }
    wait_until_connections(serving, 1);
    assert_served(serving, 1);
}

static void a_quiet_peer_is_closed_where_that_is_asked_for(void **state)
{
    struct serving *serving = *state;
    serving->settings.stalled_ms = SHORT_MS;
    serving->settings.quiet_ms = SHORT_MS;
    serve(serving);
    join(serving, 0);
    assert_null(hear(serving, 0));
    wait_until_connections(serving, 0);
}

static void the_quietest_makes_room_for_another(void **state)
{
    struct serving *serving = *state;
    serving->settings.connections_limit = 2;
    serving->settings.stalled_ms = SHORT_MS;
    serve(serving);
    join(serving, 0);
    join(serving, 1);
    wait_until_connections(serving, 2);
    say(serving, 1, "{'jsonrpc':'2.0',"); /* its end says that the time has passed */
    assert_heard_error(serving, 1, 0, -32003);
    leave(serving, 1);
    wait_until_connections(serving, 1);
    join(serving, 1);
    join(serving, 2);
    assert_served(serving, 1);
    assert_served(serving, 2);
    assert_null(hear(serving, 0));
}

static void who_holds_more_than_his_share_is_told_and_closed(void **state)
{
    struct serving *serving = *state;
    serving->settings.wire_limit_bytes = 1024 * 1024;
    serve(serving);
    join(serving, 0);
    join(serving, 1);
    assert_served(serving, 0);
    say_until_closed(serving, 1);
    assert_heard_error(serving, 1, 0, -32003);
    assert_non_null(strstr(serving->line, "more than wire_limit (1048576 bytes)"));
    assert_null(hear(serving, 1));
    wait_until_connections(serving, 1);
    assert_served(serving, 0);
}

int main(void)
{
#define limits_test(name)                                                                          \
    cmocka_unit_test_setup_teardown(name, serving_set_up_quietly, serving_tear_down)
    const struct CMUnitTest tests[] = {
        limits_test(a_line_that_does_not_end_is_told_and_its_peer_closed),
        limits_test(a_whole_line_may_be_followed_by_silence),
        limits_test(a_peer_that_reads_no_answers_is_closed),
        limits_test(a_quiet_peer_is_closed_where_that_is_asked_for),
        limits_test(the_quietest_makes_room_for_another),
        limits_test(who_holds_more_than_his_share_is_told_and_closed),
    };
    return cmocka_run_group_tests_name("a connection's limits", tests, NULL, NULL);
}
