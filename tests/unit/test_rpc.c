/* The envelopes of JSON-RPC 2.0. "Section" is one of its specification; its examples (section 7)
 * are in test_rpc_examples.c. */
#include "daemon/rpc.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/jsons.h"

/* --- parsing --- */

static void assert_parsed(const char *line)
{
    struct fault fault = {0};
    json_t *text = NULL;
    char *copy = quoted(line);
    if (rpc_parse(copy, strlen(copy), &text, &fault) != 0) {
        fail_msg("%s: %s", line, fault.message);
    }
    assert_non_null(text);
    json_decref(text);
    free(copy);
}

static void assert_not_parsed(const char *line, size_t length, const char *part)
{
    struct fault fault = {0};
    json_t *text = NULL;
    if (rpc_parse(line, length, &text, &fault) == 0) {
        fail_msg("%s is parsed", line);
    }
    assert_int_equal(fault.code, FAULT_PARSE);
    assert_null(text);
    if (!strstr(fault.message, part)) {
        fail_msg("'%s' is not in: %s", part, fault.message);
    }
}

/* RFC 8259, section 2: a JSON text is any value. */
static void any_json_text_is_parsed(void **state)
{
    (void)state;
    static const char *const LINES[] = {"{}",     "[]",   "'fog'", "1911",
                                        "-0.5e3", "true", "null",  " { } "};
    for (size_t i = 0; i < sizeof LINES / sizeof LINES[0]; i++) {
        assert_parsed(LINES[i]);
    }
}

static void what_json_does_not_know_is_not_parsed(void **state)
{
    (void)state;
    static const char *const LINES[] = {
        "",
        " ",
        "fog",
        "{\"a\":1",
        "[1,]",
        "{\"a\" 1}",
        "01",
        "+1",
        "1 2",
        "{}{}",
        "NaN",
        "'fog'",
        "\"a\tb\"",             /* a control character within a string */
        "\"\\x41\"",            /* no such escape */
        "\"\\uD800\"",          /* a lone surrogate */
        "\"\\uDC00\\uD800\"",   /* two in the wrong order */
        "\"\\u0000\"",          /* which we do not take */
        "\"\xC3\"",             /* cut UTF-8 */
        "\"\xC0\xAF\"",         /* a slash, too long by a byte */
        "\"\xED\xA0\x80\"",     /* a surrogate in UTF-8 */
        "{\"a\":1,\"a\":2}",    /* a duplicate key */
        "9223372036854775808",  /* one beyond 64 bits */
        "-9223372036854775809", /* likewise */
        "1e400",                /* beyond any double */
        "\xEF\xBB\xBF{}",       /* a byte order mark: RFC 8259, section 8.1 */
    };
    for (size_t i = 0; i < sizeof LINES / sizeof LINES[0]; i++) {
        assert_not_parsed(LINES[i], strlen(LINES[i]), "The line cannot be parsed at byte ");
    }
}

static void a_line_with_nul_is_not_parsed(void **state)
{
    (void)state;
    assert_not_parsed("{}\0", 3, "cannot be parsed");
    assert_not_parsed("\"a\0b\"", 5, "cannot be parsed");
}

static void the_greatest_numbers_are_parsed_exactly(void **state)
{
    (void)state;
    struct fault fault = {0};
    json_t *text = NULL;
    static const char LINE[] = "[9223372036854775807,-9223372036854775808]";
    assert_int_equal(rpc_parse(LINE, strlen(LINE), &text, &fault), 0);
    assert_true(json_integer_value(json_array_get(text, 0)) == INT64_MAX);
    assert_true(json_integer_value(json_array_get(text, 1)) == INT64_MIN);
    json_decref(text);
}

/* `depth` arrays within each other, as text; for free(). */
static char *nested(size_t depth)
{
    char *line = calloc(2 * depth + 1, 1);
    assert_non_null(line);
    memset(line, '[', depth);
    memset(line + depth, ']', depth);
    return line;
}

static void a_text_may_nest_64_levels(void **state)
{
    (void)state;
    char *line = nested(64);
    assert_parsed(line);
    free(line);
    line = nested(65);
    assert_not_parsed(line, 130, "nests deeper than 64 levels");
    free(line);
    line = nested(1000 * 1000); /* far more than any stack */
    assert_not_parsed(line, 2 * 1000 * 1000, "nests deeper than 64 levels");
    free(line);
}

static void brackets_within_strings_do_not_nest(void **state)
{
    (void)state;
    char line[300] = "{\"a\":\"\\\"";
    memset(line + strlen(line), '[', 200);
    strcat(line, "\\\\\"}");
    assert_parsed(line);
}

static void brackets_beside_each_other_do_not_nest(void **state)
{
    (void)state;
    char line[402] = "[";
    for (int i = 0; i < 100; i++) {
        strcat(line, i == 0 ? "{}" : ",[]");
    }
    strcat(line, "]");
    assert_parsed(line);
}

/* --- requests --- */

static void never_started(struct call *call, const json_t *params)
{
    (void)call;
    (void)params;
    fail();
}

static const struct method METHODS[] = {{"item.show", METHOD_READ, RIGHT_READ, never_started},
                                        {"item.file", METHOD_CHANGE, RIGHT_FILE, never_started}};
static const struct method_table TABLE = {.methods = METHODS, .count = 2};

struct reading {
    json_t *text;
    struct rpc_request request;
    struct fault fault;
    int code;
};

static struct reading read_request(const char *text)
{
    struct reading reading = {.text = json_of(text)};
    reading.code = rpc_read(reading.text, &TABLE, &reading.request, &reading.fault);
    return reading;
}

static void free_reading(struct reading *reading)
{
    rpc_request_deinit(&reading->request);
    json_decref(reading->text);
}

static void a_request_is_read(void **state)
{
    (void)state;
    struct reading reading = read_request(
        "{'jsonrpc': '2.0', 'id': 7, 'method': 'item.file', 'params': {'id': 'log/1'}}");
    assert_int_equal(reading.code, 0);
    assert_ptr_equal(reading.request.method, &METHODS[1]);
    assert_int_equal(json_integer_value(reading.request.id), 7);
    assert_string_equal(json_string_value(json_object_get(reading.request.params, "id")), "log/1");
    free_reading(&reading);
}

/* Section 4: an id is a string, a number or null. */
static void every_kind_of_id_comes_back_as_it_was(void **state)
{
    (void)state;
    static const char *const IDS[] = {"'seven'", "''", "0", "-9223372036854775808", "1.5", "null"};
    for (size_t i = 0; i < sizeof IDS / sizeof IDS[0]; i++) {
        char text[128];
        (void)snprintf(text, sizeof text, "{'jsonrpc':'2.0','method':'item.show','id':%s}", IDS[i]);
        struct reading reading = read_request(text);
        json_t *id = json_of(IDS[i]);
        assert_int_equal(reading.code, 0);
        assert_true(json_equal(reading.request.id, id));
        json_decref(id);
        free_reading(&reading);
    }
}

/* Section 4.1: a request without an id is a notification. */
static void a_notification_has_no_id(void **state)
{
    (void)state;
    struct reading reading = read_request("{'jsonrpc': '2.0', 'method': 'item.show'}");
    assert_int_equal(reading.code, 0);
    assert_ptr_equal(reading.request.method, &METHODS[0]);
    assert_null(reading.request.id);
    free_reading(&reading);
}

static void absent_params_are_an_empty_object(void **state)
{
    (void)state;
    struct reading reading = read_request("{'jsonrpc': '2.0', 'method': 'item.show', 'id': 1}");
    assert_true(json_is_object(reading.request.params));
    assert_int_equal(json_object_size(reading.request.params), 0);
    free_reading(&reading);
}

/* Section 4 says nothing of members that it does not name; we pass over them. */
static void members_that_the_envelope_does_not_know_are_passed_over(void **state)
{
    (void)state;
    struct reading reading =
        read_request("{'jsonrpc': '2.0', 'method': 'item.show', 'id': 1, 'trace': true}");
    assert_int_equal(reading.code, 0);
    free_reading(&reading);
}

/* --- requests that cannot be started --- */

/* `id` NULL: nobody is answered. */
static void assert_refused(const char *text, int code, const char *id, const char *sentence)
{
    struct reading reading = read_request(text);
    json_t *expected_id = id ? json_of(id) : NULL;
    assert_int_equal(reading.code, code);
    assert_int_equal(reading.fault.code, code);
    assert_string_equal(reading.fault.message, sentence);
    assert_null(reading.request.method);
    if (expected_id) {
        assert_true(json_equal(reading.request.id, expected_id));
    } else {
        assert_null(reading.request.id);
    }
    json_decref(expected_id);
    free_reading(&reading);
}

static void a_request_is_an_object(void **state)
{
    (void)state;
    static const char SENTENCE[] =
        "A request is an object with jsonrpc, method and, for an answer, id.";
    assert_refused("1", FAULT_REQUEST, "null", SENTENCE);
    assert_refused("'item.show'", FAULT_REQUEST, "null", SENTENCE);
    assert_refused("[]", FAULT_REQUEST, "null", SENTENCE); /* within a batch */
    assert_refused("null", FAULT_REQUEST, "null", SENTENCE);
}

static void a_request_names_the_version(void **state)
{
    (void)state;
    static const char SENTENCE[] = "jsonrpc is missing or not \"2.0\".";
    assert_refused("{'method': 'item.show', 'id': 1}", FAULT_REQUEST, "1", SENTENCE);
    assert_refused("{'jsonrpc': '1.0', 'method': 'item.show', 'id': 1}", FAULT_REQUEST, "1",
                   SENTENCE);
    assert_refused("{'jsonrpc': 2.0, 'method': 'item.show', 'id': 1}", FAULT_REQUEST, "1",
                   SENTENCE);
}

/* Section 5: where the id cannot be told, the answer's is null; so it is where there was none,
 * since a malformed request is no notification. */
static void a_malformed_request_is_answered_even_without_an_id(void **state)
{
    (void)state;
    assert_refused("{'jsonrpc': '2.0'}", FAULT_REQUEST, "null",
                   "method is missing or not a string.");
    assert_refused("{'jsonrpc': '2.0', 'method': 1, 'id': 'a'}", FAULT_REQUEST, "'a'",
                   "method is missing or not a string.");
    assert_refused("{'jsonrpc': '2.0', 'method': 'item.show', 'params': 'log/1', 'id': 2}",
                   FAULT_REQUEST, "2", "params is an object.");
    assert_refused("{'jsonrpc': '2.0', 'method': 'item.show', 'id': true}", FAULT_REQUEST, "null",
                   "id is a string, a number or null.");
    assert_refused("{'jsonrpc': '2.0', 'method': 'item.show', 'id': {'a': 1}}", FAULT_REQUEST,
                   "null", "id is a string, a number or null.");
}

static void a_method_that_is_not_there_is_named(void **state)
{
    (void)state;
    assert_refused("{'jsonrpc': '2.0', 'method': 'item.burn', 'id': 3}", FAULT_METHOD, "3",
                   "There is no method 'item.burn'.");
    assert_refused("{'jsonrpc': '2.0', 'method': 'item.burn'}", FAULT_METHOD, NULL,
                   "There is no method 'item.burn'.");
}

static void params_are_named_and_not_in_order(void **state)
{
    (void)state;
    assert_refused("{'jsonrpc': '2.0', 'method': 'item.show', 'params': ['log/1'], 'id': 3}",
                   FAULT_PARAMS, "3", "params is an object with named members.");
    assert_refused("{'jsonrpc': '2.0', 'method': 'item.show', 'params': []}", FAULT_PARAMS, NULL,
                   "params is an object with named members.");
}

/* --- answers --- */

/* Takes the references. */
static void assert_answer(char *text, const char *expected)
{
    assert_non_null(text);
    assert_null(strchr(text, '\n'));
    assert_json(text, expected);
    free(text);
}

static void a_result_goes_out_with_the_id(void **state)
{
    (void)state;
    json_t *id = json_string("seven");
    json_t *result = json_of("{'seq': 12, 'was': 'new'}");
    assert_answer(rpc_result_text(id, result),
                  "{'jsonrpc': '2.0', 'id': 'seven', 'result': {'seq': 12, 'was': 'new'}}");
    json_decref(id);
    json_decref(result);
}

static void a_result_that_is_written_already_goes_out_as_any_other(void **state)
{
    (void)state;
    json_t *ids[] = {json_integer(-7), json_string("the \"Tern\""), json_null(), NULL};
    json_t *result = json_pack("{s: i}", "learned", 12);
    for (size_t i = 0; i < sizeof ids / sizeof ids[0]; i++) {
        char *written = rpc_written_text(ids[i], "{\"learned\":12}");
        char *other = rpc_result_text(ids[i], result);
        assert_non_null(written);
        assert_string_equal(written, other);
        free(written);
        free(other);
        json_decref(ids[i]);
    }
    json_decref(result);
}

static void line_ends_within_strings_are_escaped(void **state)
{
    (void)state;
    json_t *result = json_string("fog\nbell\r\n");
    assert_answer(rpc_result_text(NULL, result),
                  "{'jsonrpc': '2.0', 'id': null, 'result': 'fog\\nbell\\r\\n'}");
    json_decref(result);
}

/* Section 5.1: code, message, and data where there is more to say. */
static void a_fault_tells_code_sentence_and_member(void **state)
{
    (void)state;
    struct fault fault = {0};
    json_t *id = json_integer(4);
    (void)fault_set(&fault, FAULT_PARAMS, "/tags/3", "A tag is a text.");
    assert_answer(rpc_fault_text(id, &fault),
                  "{'jsonrpc': '2.0', 'id': 4, 'error': {'code': -32602, 'message': 'A tag is a "
                  "text.', 'data': {'field': '/tags/3'}}}");
    json_decref(id);
}

static void a_fault_that_blames_no_member_has_no_data(void **state)
{
    (void)state;
    struct fault fault = {0};
    (void)fault_set(&fault, FAULT_PARSE, NULL, "No.");
    assert_answer(rpc_fault_text(NULL, &fault),
                  "{'jsonrpc': '2.0', 'id': null, 'error': {'code': -32700, 'message': 'No.'}}");
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(any_json_text_is_parsed),
        cmocka_unit_test(what_json_does_not_know_is_not_parsed),
        cmocka_unit_test(a_line_with_nul_is_not_parsed),
        cmocka_unit_test(the_greatest_numbers_are_parsed_exactly),
        cmocka_unit_test(a_text_may_nest_64_levels),
        cmocka_unit_test(brackets_within_strings_do_not_nest),
        cmocka_unit_test(brackets_beside_each_other_do_not_nest),
        cmocka_unit_test(a_request_is_read),
        cmocka_unit_test(every_kind_of_id_comes_back_as_it_was),
        cmocka_unit_test(a_notification_has_no_id),
        cmocka_unit_test(absent_params_are_an_empty_object),
        cmocka_unit_test(members_that_the_envelope_does_not_know_are_passed_over),
        cmocka_unit_test(a_request_is_an_object),
        cmocka_unit_test(a_request_names_the_version),
        cmocka_unit_test(a_malformed_request_is_answered_even_without_an_id),
        cmocka_unit_test(a_method_that_is_not_there_is_named),
        cmocka_unit_test(params_are_named_and_not_in_order),
        cmocka_unit_test(a_result_goes_out_with_the_id),
        cmocka_unit_test(a_result_that_is_written_already_goes_out_as_any_other),
        cmocka_unit_test(line_ends_within_strings_are_escaped),
        cmocka_unit_test(a_fault_tells_code_sentence_and_member),
        cmocka_unit_test(a_fault_that_blames_no_member_has_no_data),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
