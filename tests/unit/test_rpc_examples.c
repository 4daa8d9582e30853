/*
 * The examples of the JSON-RPC 2.0 specification, section 7, line by line through the queue of
 * calls, with its own invented methods. They differ in two ways: we take named params only (an
 * array is -32602, see the wire contract), so calls by position are told by name; and the error
 * messages are ours, so codes and ids are compared.
 */
#include "daemon/call_queue.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/jsons.h"

/* --- the specification's methods --- */

static void subtract(struct call *call, const json_t *params)
{
    call_answer_take(call, json_integer(json_integer_value(json_object_get(params, "minuend")) -
                                        json_integer_value(json_object_get(params, "subtrahend"))));
}

static void sum(struct call *call, const json_t *params)
{
    json_int_t total = 0;
    size_t i = 0;
    const json_t *term = NULL;
    json_array_foreach(json_object_get(params, "terms"), i, term)
    {
        total += json_integer_value(term);
    }
    call_answer_take(call, json_integer(total));
}

static void take(struct call *call, const json_t *params)
{
    (void)params;
    call_answer_take(call, json_true());
}

static void get_data(struct call *call, const json_t *params)
{
    (void)params;
    call_answer_take(call, json_pack("[s, i]", "hello", 5));
}

static const struct method METHODS[] = {
    {"subtract", METHOD_READ, RIGHT_READ, subtract},
    {"sum", METHOD_READ, RIGHT_READ, sum},
    {"update", METHOD_CHANGE, RIGHT_FILE, take},
    {"notify_hello", METHOD_CHANGE, RIGHT_FILE, take},
    {"notify_sum", METHOD_CHANGE, RIGHT_FILE, take},
    {"get_data", METHOD_READ, RIGHT_READ, get_data},
};
static const struct method_table TABLE = {.methods = METHODS,
                                          .count = sizeof METHODS / sizeof METHODS[0]};

/* --- a line in, a line out --- */

static void on_ended(void *user)
{
    (void)user;
}

/* What is answered to a line, line end included; for free(). */
static char *answer_to(const char *line)
{
    struct call_queue queue = {.table = &TABLE, .ended = on_ended};
    struct call_text text = {0};
    call_queue_add_line(&queue, line, strlen(line));
    call_queue_start(&queue, SIZE_MAX);
    assert_int_equal(call_queue_collect(&queue, &text), 0);
    assert_true(call_queue_is_empty(&queue));
    char *answer = strndup(text.bytes ? text.bytes : "", text.size);
    assert_non_null(answer);
    free(text.bytes);
    return answer;
}

/* Takes the sentence out of an answer's error; there must be one. */
static void drop_message(json_t *answer)
{
    json_t *error = json_object_get(answer, "error");
    if (error) {
        assert_true(json_string_length(json_object_get(error, "message")) > 0);
        (void)json_object_del(error, "message");
    }
}

static void assert_answered(const char *line, const char *expected)
{
    char *request = quoted(line);
    char *answer = answer_to(request);
    assert_true(strlen(answer) > 0);
    assert_ptr_equal(strchr(answer, '\n'), answer + strlen(answer) - 1); /* one line */
    json_t *found = json_loads(answer, 0, NULL);
    size_t i = 0;
    json_t *one = NULL;
    drop_message(found);
    json_array_foreach(found, i, one)
    {
        drop_message(one);
    }
    char *text = json_dumps(found, JSON_ENCODE_ANY);
    assert_json(text, expected);
    free(text);
    json_decref(found);
    free(answer);
    free(request);
}

static void assert_unanswered(const char *line)
{
    char *request = quoted(line);
    char *answer = answer_to(request);
    assert_string_equal(answer, "");
    free(answer);
    free(request);
}

/* --- the examples, in their order --- */

/* By position in the specification: [42, 23] and [23, 42]. */
static void rpc_call_with_positional_parameters_is_invalid_params_here(void **state)
{
    (void)state;
    assert_answered("{'jsonrpc': '2.0', 'method': 'subtract', 'params': [42, 23], 'id': 1}",
                    "{'jsonrpc': '2.0', 'error': {'code': -32602}, 'id': 1}");
    assert_answered("{'jsonrpc': '2.0', 'method': 'subtract', 'params': [23, 42], 'id': 2}",
                    "{'jsonrpc': '2.0', 'error': {'code': -32602}, 'id': 2}");
}

static void rpc_call_with_named_parameters(void **state)
{
    (void)state;
    assert_answered("{'jsonrpc': '2.0', 'method': 'subtract', "
                    "'params': {'subtrahend': 23, 'minuend': 42}, 'id': 3}",
                    "{'jsonrpc': '2.0', 'result': 19, 'id': 3}");
    assert_answered("{'jsonrpc': '2.0', 'method': 'subtract', "
                    "'params': {'minuend': 42, 'subtrahend': 23}, 'id': 4}",
                    "{'jsonrpc': '2.0', 'result': 19, 'id': 4}");
}

/* The first is by position in the specification; it gives nothing either way. */
static void a_notification(void **state)
{
    (void)state;
    assert_unanswered("{'jsonrpc': '2.0', 'method': 'update', 'params': [1,2,3,4,5]}");
    assert_unanswered("{'jsonrpc': '2.0', 'method': 'update', 'params': {'terms': [1,2,3,4,5]}}");
    assert_unanswered("{'jsonrpc': '2.0', 'method': 'foobar'}");
}

static void rpc_call_of_non_existent_method(void **state)
{
    (void)state;
    assert_answered("{'jsonrpc': '2.0', 'method': 'foobar', 'id': '1'}",
                    "{'jsonrpc': '2.0', 'error': {'code': -32601}, 'id': '1'}");
}

static void rpc_call_with_invalid_json(void **state)
{
    (void)state;
    assert_answered("{'jsonrpc': '2.0', 'method': 'foobar, 'params': 'bar', 'baz]",
                    "{'jsonrpc': '2.0', 'error': {'code': -32700}, 'id': null}");
}

static void rpc_call_with_invalid_request_object(void **state)
{
    (void)state;
    assert_answered("{'jsonrpc': '2.0', 'method': 1, 'params': 'bar'}",
                    "{'jsonrpc': '2.0', 'error': {'code': -32600}, 'id': null}");
}

static void rpc_call_batch_invalid_json(void **state)
{
    (void)state;
    assert_answered("[{'jsonrpc': '2.0', 'method': 'sum', 'params': [1,2,4], 'id': '1'},"
                    " {'jsonrpc': '2.0', 'method']",
                    "{'jsonrpc': '2.0', 'error': {'code': -32700}, 'id': null}");
}

static void rpc_call_with_an_empty_array(void **state)
{
    (void)state;
    assert_answered("[]", "{'jsonrpc': '2.0', 'error': {'code': -32600}, 'id': null}");
}

static void rpc_call_with_an_invalid_batch_but_not_empty(void **state)
{
    (void)state;
    assert_answered("[1]", "[{'jsonrpc': '2.0', 'error': {'code': -32600}, 'id': null}]");
}

static void rpc_call_with_invalid_batch(void **state)
{
    (void)state;
    assert_answered("[1,2,3]", "[{'jsonrpc': '2.0', 'error': {'code': -32600}, 'id': null},"
                               " {'jsonrpc': '2.0', 'error': {'code': -32600}, 'id': null},"
                               " {'jsonrpc': '2.0', 'error': {'code': -32600}, 'id': null}]");
}

/* The params of the first three are by position in the specification. */
static void rpc_call_batch(void **state)
{
    (void)state;
    assert_answered(
        "[{'jsonrpc': '2.0', 'method': 'sum', 'params': {'terms': [1,2,4]}, 'id': '1'},"
        " {'jsonrpc': '2.0', 'method': 'notify_hello', 'params': {'hello': 7}},"
        " {'jsonrpc': '2.0', 'method': 'subtract', 'params': {'minuend': 42, 'subtrahend': 23},"
        "  'id': '2'},"
        " {'foo': 'boo'},"
        " {'jsonrpc': '2.0', 'method': 'foo.get', 'params': {'name': 'myself'}, 'id': '5'},"
        " {'jsonrpc': '2.0', 'method': 'get_data', 'id': '9'}]",
        "[{'jsonrpc': '2.0', 'result': 7, 'id': '1'},"
        " {'jsonrpc': '2.0', 'result': 19, 'id': '2'},"
        " {'jsonrpc': '2.0', 'error': {'code': -32600}, 'id': null},"
        " {'jsonrpc': '2.0', 'error': {'code': -32601}, 'id': '5'},"
        " {'jsonrpc': '2.0', 'result': ['hello', 5], 'id': '9'}]");
}

/* By position in the specification; likewise by name, since both give nothing. */
static void rpc_call_batch_all_notifications(void **state)
{
    (void)state;
    assert_unanswered("[{'jsonrpc': '2.0', 'method': 'notify_sum', 'params': [1,2,4]},"
                      " {'jsonrpc': '2.0', 'method': 'notify_hello', 'params': [7]}]");
    assert_unanswered("[{'jsonrpc': '2.0', 'method': 'notify_sum', 'params': {'terms': [1,2,4]}},"
                      " {'jsonrpc': '2.0', 'method': 'notify_hello', 'params': {'hello': 7}}]");
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(rpc_call_with_positional_parameters_is_invalid_params_here),
        cmocka_unit_test(rpc_call_with_named_parameters),
        cmocka_unit_test(a_notification),
        cmocka_unit_test(rpc_call_of_non_existent_method),
        cmocka_unit_test(rpc_call_with_invalid_json),
        cmocka_unit_test(rpc_call_with_invalid_request_object),
        cmocka_unit_test(rpc_call_batch_invalid_json),
        cmocka_unit_test(rpc_call_with_an_empty_array),
        cmocka_unit_test(rpc_call_with_an_invalid_batch_but_not_empty),
        cmocka_unit_test(rpc_call_with_invalid_batch),
        cmocka_unit_test(rpc_call_batch),
        cmocka_unit_test(rpc_call_batch_all_notifications),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
