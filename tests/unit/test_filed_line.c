/* A line of items into the requests that it stands for. */
#include "client/filed_line.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <string.h>

struct fixture {
    struct filed_line line;
    char reason[FILED_LINE_REASON_BYTES];
};

static int set_up(void **state)
{
    static struct fixture fixture;
    fixture = (struct fixture){0};
    *state = &fixture;
    return 0;
}

static int tear_down(void **state)
{
    filed_line_deinit(&((struct fixture *)*state)->line);
    return 0;
}

/* The requests as METHOD PARAMS a line; texts have ' for ". */
static const char *requests_of(struct fixture *fixture, const char *text)
{
    static char requests[1024];
    char line[512];
    size_t length = 0;
    for (; text[length]; length++) {
        line[length] = (char)(text[length] == '\'' ? '"' : text[length]);
    }
    assert_int_equal(filed_line_read(line, length, &fixture->line, fixture->reason),
                     FILED_LINE_GOOD);
    requests[0] = '\0';
    for (size_t i = 0; i < fixture->line.count; i++) {
        const struct filed_request *request = &fixture->line.requests[i];
        size_t used = strlen(requests);
        assert_int_equal(request->length, strlen(request->params));
        (void)snprintf(requests + used, sizeof requests - used, "%s %s\n", request->method,
                       request->params);
    }
    for (char *at = requests; *at; at++) {
        *at = (char)(*at == '"' ? '\'' : *at);
    }
    return requests;
}

static void assert_bad(struct fixture *fixture, const char *text, const char *reason)
{
    char line[512];
    size_t length = 0;
    for (; text[length]; length++) {
        line[length] = (char)(text[length] == '\'' ? '"' : text[length]);
    }
    assert_int_equal(filed_line_read(line, length, &fixture->line, fixture->reason),
                     FILED_LINE_BAD);
    assert_string_equal(fixture->reason, reason);
    assert_int_equal(fixture->line.count, 0);
    assert_null(fixture->line.requests);
}

static void a_plain_line_is_sent_to_the_letter(void **state)
{
    assert_string_equal(requests_of(*state, "{ 'id': 'log/1', 'year': 1.50e3, 'tags': [] }"),
                        "item.file { 'id': 'log/1', 'year': 1.50e3, 'tags': [] }\n");
}

static void calls_follow_the_filing_in_their_order_with_its_id(void **state)
{
    assert_string_equal(
        requests_of(*state, "{'id':'log/1','then':["
                            "{'method':'item.rule','params':{'not':['fog']}},"
                            "{'params':{'tags':[],'drawn':'random'},'method':'item.check'},"
                            "{'method':'item.file','params':{'tags':['ice']}}],'tags':['fog']}"),
        "item.file {'id':'log/1','tags':['fog']}\n"
        "item.rule {'not':['fog'],'id':'log/1'}\n"
        "item.check {'tags':[],'drawn':'random','id':'log/1'}\n"
        "item.file {'tags':['ice'],'id':'log/1'}\n");
}

static void an_empty_list_of_calls_is_none(void **state)
{
    assert_string_equal(requests_of(*state, "{'id':'log/1','then':[]}"),
                        "item.file {'id':'log/1'}\n");
}

/* That the id is missing, or none, is for the daemon to say. */
static void without_an_id_the_calls_have_none_either(void **state)
{
    assert_string_equal(
        requests_of(*state, "{'then':[{'method':'item.rule','params':{'not':['fog']}}]}"),
        "item.file {}\n"
        "item.rule {'not':['fog']}\n");
}

static void what_is_no_item_is_told(void **state)
{
    struct fixture *fixture = *state;
    assert_bad(fixture, "[1]", "an item is a JSON object");
    assert_int_equal(filed_line_read("{\"id\":", 6, &fixture->line, fixture->reason),
                     FILED_LINE_BAD);
    assert_memory_equal(fixture->reason, "this is not JSON: ", 18);
}

static void calls_that_are_no_list_are_refused(void **state)
{
    assert_bad(*state, "{'id':'a','then':{}}", "then is not a list");
    assert_bad(*state, "{'id':'a','then':null}", "then is not a list");
}

static void a_call_has_a_method_and_params_and_nothing_else(void **state)
{
    static const char *const BAD[] = {"7", "{}", "{'method':'item.rule'}", "{'params':{}}",
                                      "{'method':'item.rule','params':{},'id':1}"};
    for (size_t i = 0; i < sizeof BAD / sizeof BAD[0]; i++) {
        char text[256];
        (void)snprintf(text, sizeof text,
                       "{'id':'a','then':[{'method':'item.rule','params':{}},%s]}", BAD[i]);
        assert_bad(*state, text, "then[1] is not an object of method and params alone");
    }
}

static void other_methods_are_refused(void **state)
{
    static const char REASON[] =
        "then[0] is of none of the methods item.file, item.rule and item.check";
    assert_bad(*state, "{'id':'a','then':[{'method':'item.withdraw','params':{}}]}", REASON);
    assert_bad(*state, "{'id':'a','then':[{'method':'item.fil','params':{}}]}", REASON);
    assert_bad(*state, "{'id':'a','then':[{'method':3,'params':{}}]}", REASON);
}

static void params_that_are_no_object_are_refused(void **state)
{
    assert_bad(*state, "{'id':'a','then':[{'method':'item.rule','params':[]}]}",
               "the params of then[0] are not an object");
}

static void a_call_about_another_item_is_refused(void **state)
{
    assert_bad(*state, "{'id':'a','then':[{'method':'item.rule','params':{'id':'b'}}]}",
               "the params of then[0] have an id: they are about the line's item");
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_plain_line_is_sent_to_the_letter),
        TEST(calls_follow_the_filing_in_their_order_with_its_id),
        TEST(an_empty_list_of_calls_is_none),
        TEST(without_an_id_the_calls_have_none_either),
        TEST(what_is_no_item_is_told),
        TEST(calls_that_are_no_list_are_refused),
        TEST(a_call_has_a_method_and_params_and_nothing_else),
        TEST(other_methods_are_refused),
        TEST(params_that_are_no_object_are_refused),
        TEST(a_call_about_another_item_is_refused),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
