/* What a command relies on is there before anything is shown. */
#include "client/reply.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <string.h>

#include "tests/unit/jsons.h"

static const struct reply_member ENTRY[] = {
    {"tag", REPLY_TEXT, false, NULL}, {"share", REPLY_NUMBER, true, NULL}, {0}};

static const struct reply_member SHAPE[] = {{"seq", REPLY_NUMBER, false, NULL},
                                            {"names", REPLY_TEXTS, true, NULL},
                                            {"tags", REPLY_OBJECTS, true, ENTRY},
                                            {0}};

/* Checks `text` (with ' for ") and expects a sentence that ends in `end`; "": none. */
static void assert_check(const char *text, const char *end)
{
    struct failure failure = {0};
    json_t *result = json_of(text);
    assert_int_equal(reply_check(result, SHAPE, &failure), *end ? FAILURE_PROTOCOL : 0);
    size_t length = strlen(failure.message);
    assert_true(length >= strlen(end));
    assert_string_equal(failure.message + length - strlen(end), end);
    json_decref(result);
}

static void an_answer_of_the_shape_passes_with_members_beyond_it(void **state)
{
    (void)state;
    assert_check("{'seq':1,'names':['a'],'tags':[{'tag':'fog','share':0.5,'more':[]}],'new':{}}",
                 "");
}

static void what_may_be_null_may_be_absent_as_well(void **state)
{
    (void)state;
    assert_check("{'seq':1,'names':null,'tags':[{'tag':'fog','share':null}]}", "");
    assert_check("{'seq':1,'tags':[{'tag':'fog'}]}", "");
}

static void a_member_that_is_missing_or_of_another_kind_is_named(void **state)
{
    (void)state;
    assert_check("{'names':[]}", ": /seq is not a number");
    assert_check("{'seq':'1'}", ": /seq is not a number");
    assert_check("{'seq':1,'names':['a',2]}", ": /names/1 is not a text");
    assert_check("{'seq':1,'tags':[{'tag':'fog'},{'tag':null}]}", ": /tags/1/tag is not a text");
    assert_check("{'seq':1,'tags':{}}", ": /tags is not a list");
}

static void an_answer_that_is_no_object_is_refused(void **state)
{
    (void)state;
    assert_check("[]", ": it is not an object");
}

static void what_is_not_known_of_an_estimate_is_not_a_number(void **state)
{
    (void)state;
    json_t *object = json_of("{'share':null,'low':0.25,'given':7,'missing':2.5,'from':'both'}");
    struct reply_estimate x = reply_estimate(object);
    assert_true(isnan(x.share) && isnan(x.high));
    assert_true(x.low == 0.25 && x.given == 7 && x.missing == 2.5);
    assert_string_equal(x.from, "both");
    json_decref(object);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(an_answer_of_the_shape_passes_with_members_beyond_it),
        cmocka_unit_test(what_may_be_null_may_be_absent_as_well),
        cmocka_unit_test(a_member_that_is_missing_or_of_another_kind_is_named),
        cmocka_unit_test(an_answer_that_is_no_object_is_refused),
        cmocka_unit_test(what_is_not_known_of_an_estimate_is_not_a_number),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
