/*
 * The client's end of the connection, against a socketpair: the test plays the daemon itself.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <unistd.h>

#include "client/wire.h"
#include "tests/unit/fake_daemon.h"

struct fixture {
    struct wire *wire;
    int daemon; /* the other end, non-blocking */
    struct failure failure;
};

static int set_up(void **state)
{
    static struct fixture fixture;
    fixture = (struct fixture){0};
    *state = &fixture;
    int ends[2];
    if (socketpair(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC, 0, ends) ||
        fcntl(ends[1], F_SETFL, O_NONBLOCK)) {
        return -1;
    }
    fixture.daemon = ends[1];
    return wire_open_take(ends[0], "/run/test", &fixture.wire, &fixture.failure);
}

static int tear_down(void **state)
{
    struct fixture *fixture = *state;
    wire_free(fixture->wire);
    return fixture->daemon >= 0 ? close(fixture->daemon) : 0;
}

static void say(const struct fixture *fixture, const char *text)
{
    assert_int_equal(write(fixture->daemon, text, strlen(text)), strlen(text));
}

static void turn(struct fixture *fixture)
{
    assert_int_equal(wire_turn(fixture->wire, NULL, 1000, &fixture->failure), 0);
}

/* Takes an answer that must have come. */
static struct wire_answer next(struct fixture *fixture)
{
    struct wire_answer answer = {0};
    assert_int_equal(wire_next(fixture->wire, &answer, &fixture->failure), 1);
    return answer;
}

static void a_request_is_one_line_with_its_own_id(void **state)
{
    struct fixture *fixture = *state;
    char line[256] = "";
    int64_t first = 0;
    int64_t second = 0;
    assert_int_equal(
        wire_queue(fixture->wire, "item.show", "{\"id\":\"a\"}", 10, &first, &fixture->failure), 0);
    assert_int_equal(wire_queue(fixture->wire, "daemon.state", "{}", 2, &second, &fixture->failure),
                     0);
    turn(fixture);
    assert_true(read(fixture->daemon, line, sizeof line - 1) > 0);
    assert_string_equal(
        line, "{\"jsonrpc\":\"2.0\",\"id\":1,\"method\":\"item.show\",\"params\":{\"id\":\"a\"}}\n"
              "{\"jsonrpc\":\"2.0\",\"id\":2,\"method\":\"daemon.state\",\"params\":{}}\n");
    assert_int_equal(first, 1);
    assert_int_equal(second, 2);
}

static void an_answer_may_come_byte_by_byte(void **state)
{
    struct fixture *fixture = *state;
    static const char ANSWER[] = "{\"jsonrpc\":\"2.0\",\"id\":1,\"result\":{\"seq\":7}}\r\n";
    struct wire_answer answer = {0};
    for (size_t i = 0; ANSWER[i]; i++) {
        assert_int_equal(wire_next(fixture->wire, &answer, &fixture->failure), 0);
        assert_int_equal(write(fixture->daemon, &ANSWER[i], 1), 1);
        turn(fixture);
    }
    answer = next(fixture);
    assert_int_equal(answer.id, 1);
    assert_int_equal(json_integer_value(json_object_get(answer.result, "seq")), 7);
    wire_answer_deinit(&answer);
}

static void the_result_is_kept_to_the_byte(void **state)
{
    struct fixture *fixture = *state;
    static const struct {
        const char *line;
        const char *result;
    } CASES[] = {
        {"{\"jsonrpc\":\"2.0\",\"id\":1,\"result\": {\"chance\": 0.10} }\n", "{\"chance\": 0.10}"},
        {"{ \"result\" : 1.50 , \"jsonrpc\":\"2.0\",\"id\":1}\n", "1.50"},
        {"{\"id\":1,\"a\\\"result\":\"}]\\\\\",\"result\":[\"x\\\"]\",{}]}\n", "[\"x\\\"]\",{}]"},
        {"{\"id\":1,\"data\":{\"result\":1},\"result\":\"\"}\n", "\"\""},
    };
    for (size_t i = 0; i < sizeof CASES / sizeof CASES[0]; i++) {
        say(fixture, CASES[i].line);
        turn(fixture);
        struct wire_answer answer = next(fixture);
        assert_int_equal(answer.result_text_length, strlen(CASES[i].result));
        assert_memory_equal(answer.result_text, CASES[i].result, strlen(CASES[i].result));
        wire_answer_deinit(&answer);
    }
}

static void an_error_carries_code_sentence_and_member(void **state)
{
    struct fixture *fixture = *state;
    say(fixture,
        "{\"jsonrpc\":\"2.0\",\"id\":1,\"error\":{\"code\":-32602,\"message\":\"A tag is a "
        "text.\",\"data\":{\"field\":\"/tags/3\"}}}\n");
    turn(fixture);
    struct wire_answer answer = next(fixture);
    char reason[64];
    assert_int_equal(answer.code, WIRE_PARAMS);
    assert_null(answer.result);
    wire_reason(&answer, reason, sizeof reason);
    assert_string_equal(reason, "A tag is a text (/tags/3)");
    wire_reason(&answer, reason, 8);
    assert_string_equal(reason, "A tag i");
    wire_answer_deinit(&answer);
}

static void a_line_that_is_no_answer_is_a_failure_of_the_protocol(void **state)
{
    static const char *const LINES[] = {
        "hello\n",
        "[]\n",
        "{\"jsonrpc\":\"2.0\",\"id\":1}\n",
        "{\"jsonrpc\":\"2.0\",\"result\":1}\n",
        "{\"jsonrpc\":\"2.0\",\"id\":\"1\",\"result\":1}\n",
        "{\"jsonrpc\":\"2.0\",\"id\":1,\"result\":1,\"error\":{\"code\":1,\"message\":\"\"}}\n",
        "{\"jsonrpc\":\"2.0\",\"id\":1,\"error\":{\"message\":\"x\"}}\n",
        "{\"jsonrpc\":\"2.0\",\"id\":1,\"error\":{\"code\":-1}}\n",
        "{\"jsonrpc\":\"2.0\",\"id\":1,\"id\":2,\"result\":1}\n",
    };
    struct fixture *fixture = *state;
    for (size_t i = 0; i < sizeof LINES / sizeof LINES[0]; i++) {
        struct wire_answer answer = {0};
        struct failure failure = {0};
        say(fixture, LINES[i]);
        turn(fixture);
        assert_int_equal(wire_next(fixture->wire, &answer, &failure), FAILURE_PROTOCOL);
        assert_non_null(strstr(failure.message, "/run/test"));
    }
}

static void requests_go_out_while_answers_come_in(void **state)
{
    struct fixture *fixture = *state;
    char *params = malloc(1024 * 1024 + 3);
    assert_non_null(params);
    memset(params, ' ', 1024 * 1024 + 2);
    params[0] = '{';
    params[1024 * 1024 + 1] = '}';
    int64_t id = 0;
    for (int i = 0; i < 4; i++) { /* far more than a socket holds */
        assert_int_equal(
            wire_queue(fixture->wire, "item.file", params, 1024 * 1024 + 2, &id, &fixture->failure),
            0);
    }
    free(params);
    size_t arrived = 0;
    size_t answers = 0;
    char piece[65536];
    bool said = false;
    for (int i = 0; i < 100000 && (arrived < 4U * 1024 * 1024 || answers < 1); i++) {
        turn(fixture);
        ssize_t count = read(fixture->daemon, piece, sizeof piece);
        arrived += count > 0 ? (size_t)count : 0;
        if (!said) {
            say(fixture, "{\"jsonrpc\":\"2.0\",\"id\":1,\"result\":{}}\n");
            said = true;
        }
        struct wire_answer answer = {0};
        int found = wire_next(fixture->wire, &answer, &fixture->failure);
        assert_true(found >= 0);
        if (found) {
            assert_true(arrived < 4U * 1024 * 1024); /* it did not wait for the last byte */
            answers++;
            wire_answer_deinit(&answer);
        }
    }
    assert_int_equal(answers, 1);
    assert_true(arrived > 4U * 1024 * 1024);
}

static void what_was_said_before_the_end_can_still_be_taken(void **state)
{
    struct fixture *fixture = *state;
    int64_t id = 0;
    say(fixture, "{\"jsonrpc\":\"2.0\",\"id\":null,\"error\":{\"code\":-32003,\"message\":\"There "
                 "are too many connections.\"}}\n");
    assert_int_equal(close(fixture->daemon), 0);
    fixture->daemon = -1;
    assert_int_equal(wire_queue(fixture->wire, "item.list", "{}", 2, &id, &fixture->failure), 0);
    turn(fixture);
    turn(fixture);
    assert_true(wire_closed(fixture->wire));
    struct wire_answer answer = next(fixture);
    assert_int_equal(answer.id, 0);
    assert_int_equal(wire_fail(&answer, &fixture->failure), FAILURE_AGAIN);
    assert_string_equal(fixture->failure.message, "There are too many connections");
    wire_answer_deinit(&answer);
}

static void a_call_to_a_daemon_that_goes_away_is_a_failure(void **state)
{
    struct fixture *fixture = *state;
    struct wire_answer answer = {0};
    assert_int_equal(shutdown(fixture->daemon, SHUT_RDWR), 0);
    assert_int_equal(
        wire_call_take(fixture->wire, "daemon.state", json_object(), &answer, &fixture->failure),
        FAILURE_UNREACHABLE);
    assert_string_equal(fixture->failure.message, "the daemon at /run/test closed the connection");
}

static void each_code_of_the_contract_ends_in_its_exit_code(void **state)
{
    (void)state;
    static const struct {
        int64_t wire;
        int exit_code;
    } CODES[] = {{-32602, 65}, {-32001, 65}, {-32002, 65}, {-32003, 65}, {-32004, 77},
                 {-32005, 75}, {-32006, 75}, {-32603, 70}, {-32601, 76}, {-32600, 76}};
    for (size_t i = 0; i < sizeof CODES / sizeof CODES[0]; i++) {
        struct wire_answer answer = {.id = 1, .code = CODES[i].wire, .message = "No.", .field = ""};
        struct failure failure = {0};
        assert_int_equal(-wire_fail(&answer, &failure), CODES[i].exit_code);
        assert_string_equal(failure.message, "No");
    }
}

/* --- connecting ----------------------------------------------------------------------------- */

static void assert_unreached(const char *path, int code, const char *part)
{
    struct wire *wire = NULL;
    struct failure failure = {0};
    assert_int_equal(wire_open(path, &wire, &failure), code);
    assert_non_null(strstr(failure.message, part));
    assert_null(wire);
}

static void a_missing_socket_is_named(void **state)
{
    (void)state;
    assert_unreached("/tmp/undertag-none/socket", FAILURE_UNREACHABLE,
                     "there is no socket /tmp/undertag-none/socket");
}

static bool never_called(struct fake_daemon *fake, json_t *request, FILE *out)
{
    (void)fake;
    (void)request;
    (void)out;
    return false;
}

static void a_socket_that_nobody_listens_to_is_named(void **state)
{
    (void)state;
    struct fake_daemon fake = {.handle = never_called};
    assert_int_equal(fake_daemon_start(&fake), 0);
    char path[sizeof fake.path];
    strcpy(path, fake.path);
    assert_int_equal(shutdown(fake.listener, SHUT_RDWR), 0);
    assert_unreached(path, FAILURE_UNREACHABLE, "nothing listens at /tmp/undertag-test-");
    fake_daemon_stop(&fake);
}

static void a_path_that_no_socket_can_have_is_refused(void **state)
{
    (void)state;
    char path[200];
    memset(path, 'a', sizeof path - 1);
    path[sizeof path - 1] = '\0';
    assert_unreached(path, FAILURE_SETTINGS, "has 199 bytes, and 1 to 107 are possible");
    assert_unreached("", FAILURE_SETTINGS, "has 0 bytes");
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup_teardown(a_request_is_one_line_with_its_own_id, set_up, tear_down),
        cmocka_unit_test_setup_teardown(an_answer_may_come_byte_by_byte, set_up, tear_down),
        cmocka_unit_test_setup_teardown(the_result_is_kept_to_the_byte, set_up, tear_down),
        cmocka_unit_test_setup_teardown(an_error_carries_code_sentence_and_member, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(a_line_that_is_no_answer_is_a_failure_of_the_protocol,
                                        set_up, tear_down),
        cmocka_unit_test_setup_teardown(requests_go_out_while_answers_come_in, set_up, tear_down),
        cmocka_unit_test_setup_teardown(what_was_said_before_the_end_can_still_be_taken, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(a_call_to_a_daemon_that_goes_away_is_a_failure, set_up,
                                        tear_down),
        cmocka_unit_test(each_code_of_the_contract_ends_in_its_exit_code),
        cmocka_unit_test(a_missing_socket_is_named),
        cmocka_unit_test(a_socket_that_nobody_listens_to_is_named),
        cmocka_unit_test(a_path_that_no_socket_can_have_is_refused),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
