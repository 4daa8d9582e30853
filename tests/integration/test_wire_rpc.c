/*
 * The envelopes: JSON-RPC 2.0, a text a line. The examples are those of section 7 of its
 * specification (jsonrpc.org/specification), translated to methods of ours.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <string.h>

#include "tests/integration/service.h"

/* An answer with an error of this code and this id, given as JSON. */
static void assert_fault(const json_t *answer, int code, const char *id)
{
    assert_int_equal(json_object_size(answer), 3);
    assert_string_equal(string(answer, "jsonrpc"), "2.0");
    assert_json(json_object_get(answer, "id"), id);
    assert_int_equal(whole(json_object_get(answer, "error"), "code"), code);
}

static void assert_result(const json_t *answer, const char *id)
{
    assert_int_equal(json_object_size(answer), 3);
    assert_string_equal(string(answer, "jsonrpc"), "2.0");
    assert_json(json_object_get(answer, "id"), id);
    assert_true(json_is_object(json_object_get(answer, "result")));
}

/* Whatever was sent before had no answer but those that were read. */
static void assert_nothing_more(struct peer *peer)
{
    assert_int_equal(whole(ask(peer, "item.list", "{}"), "next"), ask_seq(peer));
}

static void file_two(struct peer *peer)
{
    (void)ask(peer, "item.file", "{'id': 'a', 'tags': ['fog']}");
    (void)ask(peer, "item.file", "{'id': 'b', 'tags': ['bell']}");
}

/* --- section 7 ------------------------------------------------------------------------------- */

static void a_call_with_named_parameters_is_answered(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    file_two(peer);
    peer_say(peer, "{'jsonrpc': '2.0', 'method': 'item.show', 'params': {'id': 'a'}, 'id': 3}");
    assert_result(peer_answer(peer), "3");
    peer_say(peer, "{'id': 4, 'params': {'id': 'b'}, 'method': 'item.show', 'jsonrpc': '2.0'}");
    const json_t *answer = peer_answer(peer);
    assert_result(answer, "4");
    assert_string_equal(string(json_object_get(answer, "result"), "id"), "b");
}

/* The specification leaves it to a method which of the two kinds it takes. */
static void a_call_with_positional_parameters_is_refused(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    peer_say(peer, "{'jsonrpc': '2.0', 'method': 'item.show', 'params': ['a'], 'id': 1}");
    assert_fault(peer_answer(peer), -32602, "1");
    peer_say(peer, "{'jsonrpc': '2.0', 'method': 'item.list', 'params': [], 'id': 2}");
    assert_fault(peer_answer(peer), -32602, "2");
}

static void a_notification_is_done_and_not_answered(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    peer_say(peer, "{'jsonrpc': '2.0', 'method': 'item.file', 'params': {'id': 'a', 'tags': []}}");
    assert_string_equal(string(ask(peer, "item.show", "{'id': 'a'}"), "id"), "a");
}

static void a_notification_that_fails_is_not_answered(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    peer_say(peer, "{'jsonrpc': '2.0', 'method': 'foobar'}");
    peer_say(peer, "{'jsonrpc': '2.0', 'method': 'item.show', 'params': [1, 2, 3, 4, 5]}");
    peer_say(peer, "{'jsonrpc': '2.0', 'method': 'item.show', 'params': {'id': 'none'}}");
    assert_nothing_more(peer);
}

static void a_method_that_is_not_there_is_named(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    peer_say(peer, "{'jsonrpc': '2.0', 'method': 'foobar', 'id': '1'}");
    const json_t *answer = peer_answer(peer);
    assert_fault(answer, -32601, "'1'");
    assert_non_null(strstr(string(json_object_get(answer, "error"), "message"), "foobar"));
}

static void a_call_that_is_no_json_is_a_parse_error(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    peer_say(peer, "{'jsonrpc': '2.0', 'method': 'foobar, 'params': 'bar', 'baz]");
    assert_fault(peer_answer(peer), -32700, "null");
}

static void a_call_that_is_no_request_is_invalid(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    peer_say(peer, "{'jsonrpc': '2.0', 'method': 1, 'params': 'bar'}");
    assert_fault(peer_answer(peer), -32600, "null");
}

static void a_batch_that_is_no_json_is_one_parse_error(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    peer_say(peer, "[{'jsonrpc': '2.0', 'method': 'item.list', 'params': {}, 'id': '1'}, "
                   "{'jsonrpc': '2.0', 'method'");
    assert_fault(peer_answer(peer), -32700, "null");
    assert_nothing_more(peer);
}

static void an_empty_batch_is_one_invalid_request(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    peer_say(peer, "[]");
    assert_fault(peer_answer(peer), -32600, "null");
}

static void a_batch_of_what_is_no_request_has_an_error_for_each(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    peer_say(peer, "[1]");
    const json_t *one = peer_answer(peer);
    assert_int_equal(json_array_size(one), 1);
    assert_fault(json_array_get(one, 0), -32600, "null");
    peer_say(peer, "[1, 2, 3]");
    const json_t *three = peer_answer(peer);
    assert_int_equal(json_array_size(three), 3);
    for (size_t i = 0; i < 3; i++) {
        assert_fault(json_array_get(three, i), -32600, "null");
    }
}

static void a_mixed_batch_is_answered_one_by_one(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    file_two(peer);
    peer_say(peer,
             "[{'jsonrpc': '2.0', 'method': 'item.show', 'params': {'id': 'a'}, 'id': '1'}, "
             "{'jsonrpc': '2.0', 'method': 'item.file', 'params': {'id': 'c', 'tags': []}}, "
             "{'jsonrpc': '2.0', 'method': 'item.show', 'params': {'id': 'c'}, 'id': '2'}, "
             "{'foo': 'boo'}, "
             "{'jsonrpc': '2.0', 'method': 'foo.get', 'params': {'name': 'myself'}, 'id': '5'}, "
             "{'jsonrpc': '2.0', 'method': 'daemon.state', 'id': '9'}]");
    const json_t *answers = peer_answer(peer);
    assert_int_equal(json_array_size(answers), 5);
    assert_result(json_array_get(answers, 0), "'1'");
    assert_result(json_array_get(answers, 1), "'2'");
    assert_fault(json_array_get(answers, 2), -32600, "null");
    assert_fault(json_array_get(answers, 3), -32601, "'5'");
    assert_result(json_array_get(answers, 4), "'9'");
}

static void a_batch_of_notifications_is_not_answered(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    peer_say(peer, "[{'jsonrpc': '2.0', 'method': 'item.file', 'params': {'id': 'a', 'tags': []}}, "
                   "{'jsonrpc': '2.0', 'method': 'item.file', 'params': {'id': 'b', 'tags': []}}]");
    assert_nothing_more(peer);
    assert_int_equal(ask_seq(peer), 2);
}

/* --- envelopes beyond the examples ----------------------------------------------------------- */

static void an_id_comes_back_as_it_was_given(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char *const IDS[] = {
        "'a'", "''", "0", "-7", "null", "1.5", "9223372036854775807", "'\\u00e9\\n'"};
    for (size_t i = 0; i < sizeof IDS / sizeof IDS[0]; i++) {
        peer_say(peer, "{'jsonrpc': '2.0', 'method': 'item.list', 'id': %s}", IDS[i]);
        assert_result(peer_answer(peer), IDS[i]);
        peer_say(peer, "{'jsonrpc': '2.0', 'method': 'none', 'id': %s}", IDS[i]);
        assert_fault(peer_answer(peer), -32601, IDS[i]);
    }
}

static void an_envelope_that_is_malformed_is_an_invalid_request(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char *const WITHOUT_ID[] = {
        "1",
        "'item.list'",
        "null",
        "{}",
        "{'jsonrpc': '2.0'}",
        "{'jsonrpc': '2.0', 'method': 'item.list', 'id': {}}",
        "{'jsonrpc': '2.0', 'method': 'item.list', 'id': [1]}",
        "{'jsonrpc': '2.0', 'method': 'item.list', 'id': true}",
    };
    static const char *const WITH_ID[] = {
        "{'jsonrpc': '1.0', 'method': 'item.list', 'id': 7}",
        "{'jsonrpc': 2.0, 'method': 'item.list', 'id': 7}",
        "{'method': 'item.list', 'id': 7}",
        "{'jsonrpc': '2.0', 'id': 7}",
        "{'jsonrpc': '2.0', 'method': null, 'id': 7}",
        "{'jsonrpc': '2.0', 'method': 'item.list', 'params': 'x', 'id': 7}",
        "{'jsonrpc': '2.0', 'method': 'item.list', 'params': null, 'id': 7}",
    };
    for (size_t i = 0; i < sizeof WITHOUT_ID / sizeof WITHOUT_ID[0]; i++) {
        peer_say(peer, "%s", WITHOUT_ID[i]);
        assert_fault(peer_answer(peer), -32600, "null");
    }
    for (size_t i = 0; i < sizeof WITH_ID / sizeof WITH_ID[0]; i++) {
        peer_say(peer, "%s", WITH_ID[i]);
        assert_fault(peer_answer(peer), -32600, "7");
    }
}

static void absent_parameters_are_none(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    peer_say(peer, "{'jsonrpc': '2.0', 'method': 'item.list', 'id': 1}");
    assert_result(peer_answer(peer), "1");
}

static void a_member_that_is_not_known_is_named_by_its_pointer(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char *const METHODS[] = {"item.file", "item.withdraw", "item.gaps",
                                          "item.show", "item.list",     "tag.show",
                                          "tag.list",  "daemon.state"};
    for (size_t i = 0; i < sizeof METHODS / sizeof METHODS[0]; i++) {
        assert_error(ask_refused(peer, METHODS[i], "{'lamp': 1}"), -32602, "/lamp");
    }
    /* RFC 6901, section 3: ~ is written ~0, / is written ~1. */
    assert_error(ask_refused(peer, "item.list", "{'a/b~c': 1}"), -32602, "/a~1b~0c");
}

/* --- lines ----------------------------------------------------------------------------------- */

static void a_carriage_return_before_the_end_of_a_line_is_passed_over(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    peer_say(peer, "{'jsonrpc': '2.0', 'method': 'item.list', 'id': 1}\r");
    assert_result(peer_answer(peer), "1");
}

static void empty_lines_are_ignored(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    peer_send(peer, "\n\r\n\n", 4);
    assert_nothing_more(peer);
}

static void a_line_may_come_in_pieces(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char LINE[] = "{\"jsonrpc\": \"2.0\", \"method\": \"item.list\", \"id\": 1}\n";
    for (size_t i = 0; i + 1 < sizeof LINE; i++) {
        peer_send(peer, &LINE[i], 1);
    }
    assert_result(peer_answer(peer), "1");
}

/* --- lines that cannot be parsed ------------------------------------------------------------- */

/* A line is refused with -32700 and id null, and the connection lives on. */
static void assert_not_parsed(struct peer *peer, const char *line, size_t size)
{
    peer_send(peer, line, size);
    peer_send(peer, "\n", 1);
    const json_t *answer = peer_answer(peer);
    assert_fault(answer, -32700, "null");
    assert_error(json_object_get(answer, "error"), -32700, "");
    assert_nothing_more(peer);
}

#define ASSERT_NOT_PARSED(peer, line) assert_not_parsed(peer, line, sizeof(line) - 1)

static void what_is_not_json_is_a_parse_error(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    ASSERT_NOT_PARSED(peer, "fog");
    ASSERT_NOT_PARSED(peer, "{");
    ASSERT_NOT_PARSED(peer, " ");
    ASSERT_NOT_PARSED(peer, "{} {}");
    ASSERT_NOT_PARSED(peer, "{\"id\": 01}");
    ASSERT_NOT_PARSED(peer, "{\"id\": NaN}");
    ASSERT_NOT_PARSED(peer, "\xEF\xBB\xBF{}");
}

static void invalid_utf8_is_a_parse_error(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    ASSERT_NOT_PARSED(peer, "{\"id\": \"\xFF\"}");
    ASSERT_NOT_PARSED(peer, "{\"id\": \"\xC3\"}");
    ASSERT_NOT_PARSED(peer, "{\"id\": \"\xC0\xAF\"}");         /* overlong */
    ASSERT_NOT_PARSED(peer, "{\"id\": \"\xED\xA0\x80\"}");     /* a surrogate */
    ASSERT_NOT_PARSED(peer, "{\"id\": \"\xF4\x90\x80\x80\"}"); /* beyond U+10FFFF */
}

static void a_nul_is_a_parse_error(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    ASSERT_NOT_PARSED(peer, "{\"id\": \"a\0b\"}");
    ASSERT_NOT_PARSED(peer, "{}\0");
    ASSERT_NOT_PARSED(peer, "\0");
    ASSERT_NOT_PARSED(peer, "{\"id\": \"a\\u0000b\"}");
    ASSERT_NOT_PARSED(peer, "{\"a\\u0000b\": 1}");
}

static void a_lone_surrogate_is_a_parse_error(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    ASSERT_NOT_PARSED(peer, "{\"id\": \"\\ud800\"}");
    ASSERT_NOT_PARSED(peer, "{\"id\": \"\\udc00\"}");
    ASSERT_NOT_PARSED(peer, "{\"id\": \"\\ud800\\ud800\"}");
}

static void a_key_that_is_given_twice_is_a_parse_error(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    ASSERT_NOT_PARSED(peer, "{\"jsonrpc\": \"2.0\", \"method\": \"item.list\", \"id\": 1, "
                            "\"id\": 2}");
    ASSERT_NOT_PARSED(peer, "{\"jsonrpc\": \"2.0\", \"method\": \"item.show\", \"id\": 1, "
                            "\"params\": {\"id\": \"a\", \"id\": \"b\"}}");
}

static void a_number_beyond_64_bits_is_a_parse_error(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    ASSERT_NOT_PARSED(peer, "{\"id\": 9223372036854775808}"); /* 2^63 */
    ASSERT_NOT_PARSED(peer, "{\"id\": -9223372036854775809}");
    ASSERT_NOT_PARSED(peer, "{\"id\": 1e400}"); /* beyond a double */
}

/* A request whose text nests as deep as that: its id is a list in a list ... */
static size_t write_nested(char *line, size_t depth)
{
    size_t lists = depth - 2; /* the request and its params are around them */
    char *at = line;
    at += sprintf(at, "{\"jsonrpc\":\"2.0\",\"id\":1,\"method\":\"item.show\",\"params\":{\"id\":");
    memset(at, '[', lists);
    memset(at + lists, ']', lists);
    at += 2 * lists;
    at += sprintf(at, "}}");
    return (size_t)(at - line);
}

static void a_text_that_nests_deeper_than_64_is_a_parse_error(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static char line[300000];
    peer_send(peer, line, write_nested(line, 64));
    peer_send(peer, "\n", 1);
    assert_error(json_object_get(peer_answer(peer), "error"), -32602, "/id");
    assert_not_parsed(peer, line, write_nested(line, 65));
    assert_not_parsed(peer, line, write_nested(line, 100000));
}

static void brackets_within_a_string_do_not_nest(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    char id[101] = "";
    memset(id, '[', 100);
    (void)ask(peer, "item.file", "{'id': '%s', 'title': '\\'%s', 'tags': []}", id, id);
    assert_string_equal(string(ask(peer, "item.show", "{'id': '%s'}", id), "id"), id);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, service_set_up, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_call_with_named_parameters_is_answered),
        TEST(a_call_with_positional_parameters_is_refused),
        TEST(a_notification_is_done_and_not_answered),
        TEST(a_notification_that_fails_is_not_answered),
        TEST(a_method_that_is_not_there_is_named),
        TEST(a_call_that_is_no_json_is_a_parse_error),
        TEST(a_call_that_is_no_request_is_invalid),
        TEST(a_batch_that_is_no_json_is_one_parse_error),
        TEST(an_empty_batch_is_one_invalid_request),
        TEST(a_batch_of_what_is_no_request_has_an_error_for_each),
        TEST(a_mixed_batch_is_answered_one_by_one),
        TEST(a_batch_of_notifications_is_not_answered),
        TEST(an_id_comes_back_as_it_was_given),
        TEST(an_envelope_that_is_malformed_is_an_invalid_request),
        TEST(absent_parameters_are_none),
        TEST(a_member_that_is_not_known_is_named_by_its_pointer),
        TEST(a_carriage_return_before_the_end_of_a_line_is_passed_over),
        TEST(empty_lines_are_ignored),
        TEST(a_line_may_come_in_pieces),
        TEST(what_is_not_json_is_a_parse_error),
        TEST(invalid_utf8_is_a_parse_error),
        TEST(a_nul_is_a_parse_error),
        TEST(a_lone_surrogate_is_a_parse_error),
        TEST(a_key_that_is_given_twice_is_a_parse_error),
        TEST(a_number_beyond_64_bits_is_a_parse_error),
        TEST(a_text_that_nests_deeper_than_64_is_a_parse_error),
        TEST(brackets_within_a_string_do_not_nest),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
