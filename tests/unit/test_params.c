/* Reading the members of a request: what is there, what is absent, what is wrong and how it is
 * told. Names and lists of names are in test_params_names.c. */
#include "daemon/params.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/jsons.h"
#include "tests/unit/near.h"

/* The fault names the member and says what is allowed. */
static void assert_fault(const struct fault *fault, int code, const char *field,
                         const char *sentence)
{
    assert_int_equal(fault->code, code);
    assert_string_equal(fault->field, field);
    assert_string_equal(fault->message, sentence);
}

/* --- members --- */

static void known_members_are_let_through(void **state)
{
    (void)state;
    static const char *const NAMES[] = {"id", "tags", NULL};
    struct fault fault = {0};
    json_t *params = json_of("{'tags': [], 'id': 'log/1'}");
    assert_int_equal(params_known(params, NAMES, &fault), 0);
    assert_int_equal(fault.code, 0);
    json_decref(params);
}

static void an_unknown_member_is_named(void **state)
{
    (void)state;
    static const char *const NAMES[] = {"id", NULL};
    struct fault fault = {0};
    json_t *params = json_of("{'id': 'log/1', 'tag/s': []}");
    assert_int_equal(params_known(params, NAMES, &fault), FAULT_PARAMS);
    assert_fault(&fault, FAULT_PARAMS, "/tag~1s", "There is no member 'tag/s' here.");
    json_decref(params);
}

static void a_member_that_is_null_is_there(void **state)
{
    (void)state;
    json_t *params = json_of("{'id': null}");
    assert_true(params_has(params, "id"));
    assert_false(params_has(params, "tags"));
    json_decref(params);
}

/* --- texts --- */

enum {
    TEXT_LIMIT = 10
};

static int read_text(const char *text, struct store_text *ret_text, struct fault *fault)
{
    json_t *params = json_of(text);
    int code = params_text(params, "text", TEXT_LIMIT, "text_limit", ret_text, fault);
    json_decref(params);
    return code;
}

static void an_absent_text_is_empty(void **state)
{
    (void)state;
    struct fault fault = {0};
    struct store_text text = {.data = NULL, .size = 77};
    assert_int_equal(read_text("{}", &text, &fault), 0);
    assert_int_equal(text.size, 0);
    assert_non_null(text.data);
}

static void a_text_is_borrowed_from_params(void **state)
{
    (void)state;
    struct fault fault = {0};
    struct store_text text = {0};
    json_t *params = json_of("{'text': 'fog\\nbell'}");
    assert_int_equal(params_text(params, "text", TEXT_LIMIT, "text_limit", &text, &fault), 0);
    assert_ptr_equal(text.data, json_string_value(json_object_get(params, "text")));
    assert_int_equal(text.size, 8);
    json_decref(params);
}

/* Ten bytes of UTF-8, whatever they are: five letters ö. */
static void a_text_as_long_as_the_limit_is_taken_and_one_byte_more_is_not(void **state)
{
    (void)state;
    struct fault fault = {0};
    struct store_text text = {.size = 77};
    assert_int_equal(read_text("{'text': 'ööööö'}", &text, &fault), 0);
    assert_int_equal(text.size, 10);
    assert_int_equal(read_text("{'text': 'öööööo'}", &text, &fault), FAULT_LIMIT);
    assert_fault(&fault, FAULT_LIMIT, "/text",
                 "text is longer than text_limit, which is 10 bytes.");
    assert_int_equal(text.size, 10);
}

static void what_is_no_string_is_no_text(void **state)
{
    (void)state;
    static const char *const TEXTS[] = {"{'text': 7}", "{'text': null}", "{'text': ['fog']}"};
    for (size_t i = 0; i < sizeof TEXTS / sizeof TEXTS[0]; i++) {
        struct fault fault = {0};
        struct store_text text = {.size = 77};
        assert_int_equal(read_text(TEXTS[i], &text, &fault), FAULT_PARAMS);
        assert_fault(&fault, FAULT_PARAMS, "/text", "text is a string.");
        assert_int_equal(text.size, 77);
    }
}

/* --- languages --- */

static int read_language(const char *text, struct store_text *ret_language, struct fault *fault)
{
    json_t *params = json_of(text);
    int code = params_language(params, "language", ret_language, fault);
    json_decref(params);
    return code;
}

/* "de-CH-1996" is RFC 5646's own (section 2.2.5); its section 4.4.1 counts 35 characters for the
 * longest that programs should expect. */
static void a_language_is_a_code(void **state)
{
    (void)state;
    struct fault fault = {0};
    struct store_text language = {.size = 77};
    assert_int_equal(read_language("{}", &language, &fault), 0);
    assert_int_equal(language.size, 0);
    assert_int_equal(read_language("{'language': 'de-CH-1996'}", &language, &fault), 0);
    assert_int_equal(language.size, 10);
    assert_int_equal(
        read_language("{'language': 'aaa-bbb-ccc-ddd-eeee-ff-ggggg-hhhhh'}", &language, &fault), 0);
    assert_int_equal(language.size, 35);
    assert_int_equal(
        read_language("{'language': 'aaa-bbb-ccc-ddd-eeee-ff-ggggg-hhhhhh'}", &language, &fault),
        FAULT_PARAMS);
}

static void what_is_no_code_is_no_language(void **state)
{
    (void)state;
    static const char *const TEXTS[] = {"{'language': ''}",   "{'language': 'de_CH'}",
                                        "{'language': 'dé'}", "{'language': 'de '}",
                                        "{'language': 1}",    "{'language': null}"};
    for (size_t i = 0; i < sizeof TEXTS / sizeof TEXTS[0]; i++) {
        struct fault fault = {0};
        struct store_text language = {.size = 77};
        assert_int_equal(read_language(TEXTS[i], &language, &fault), FAULT_PARAMS);
        assert_fault(&fault, FAULT_PARAMS, "/language",
                     "language is a language's code such as \"en\" or \"de-CH\".");
        assert_int_equal(language.size, 77);
    }
}

/* --- times --- */

static int read_time(const char *text, char *ret_time, struct fault *fault)
{
    json_t *params = json_of(text);
    int code = params_time(params, "filed_at", ret_time, fault);
    json_decref(params);
    return code;
}

static void a_time_is_written_in_utc(void **state)
{
    (void)state;
    struct fault fault = {0};
    char text[PARAMS_TIME_BYTES] = "before";
    assert_int_equal(read_time("{'filed_at': '1911-03-09T19:30:00+01:00'}", text, &fault), 0);
    assert_string_equal(text, "1911-03-09T18:30:00Z");
    assert_int_equal(read_time("{}", text, &fault), 0);
    assert_string_equal(text, "");
}

static void what_is_no_time_is_refused(void **state)
{
    (void)state;
    static const char *const TEXTS[] = {"{'filed_at': '9 March 1911'}", "{'filed_at': ''}",
                                        "{'filed_at': 1911}", "{'filed_at': null}"};
    for (size_t i = 0; i < sizeof TEXTS / sizeof TEXTS[0]; i++) {
        struct fault fault = {0};
        char text[PARAMS_TIME_BYTES] = "before";
        assert_int_equal(read_time(TEXTS[i], text, &fault), FAULT_PARAMS);
        assert_fault(&fault, FAULT_PARAMS, "/filed_at",
                     "filed_at is a time of RFC 3339 such as \"1911-03-09T18:30:00Z\".");
        assert_string_equal(text, "before");
    }
}

/* --- numbers --- */

static int read_whole(const char *text, uint64_t *ret_value, struct fault *fault)
{
    json_t *params = json_of(text);
    int code = params_whole(params, "most", 1, 1000, ret_value, fault);
    json_decref(params);
    return code;
}

static void a_whole_number_may_be_either_bound(void **state)
{
    (void)state;
    struct fault fault = {0};
    uint64_t most = 77;
    assert_int_equal(read_whole("{}", &most, &fault), 0);
    assert_int_equal(most, 77);
    assert_int_equal(read_whole("{'most': 1}", &most, &fault), 0);
    assert_int_equal(most, 1);
    assert_int_equal(read_whole("{'most': 1000}", &most, &fault), 0);
    assert_int_equal(most, 1000);
}

static void what_is_no_whole_number_within_the_bounds_is_refused(void **state)
{
    (void)state;
    static const char *const TEXTS[] = {"{'most': 0}",   "{'most': 1001}", "{'most': -1}",
                                        "{'most': 2.0}", "{'most': '5'}",  "{'most': null}",
                                        "{'most': true}"};
    for (size_t i = 0; i < sizeof TEXTS / sizeof TEXTS[0]; i++) {
        struct fault fault = {0};
        uint64_t most = 77;
        assert_int_equal(read_whole(TEXTS[i], &most, &fault), FAULT_PARAMS);
        assert_fault(&fault, FAULT_PARAMS, "/most", "most is a whole number from 1 to 1000.");
        assert_int_equal(most, 77);
    }
}

static void a_seq_may_be_as_large_as_json_can_say(void **state)
{
    (void)state;
    struct fault fault = {0};
    uint64_t since = 0;
    json_t *params = json_of("{'since': 9223372036854775807}");
    assert_int_equal(params_whole(params, "since", 0, UINT64_MAX, &since, &fault), 0);
    assert_int_equal(since, INT64_MAX);
    json_decref(params);
}

static int read_share(const char *text, double *ret_value, struct fault *fault)
{
    json_t *params = json_of(text);
    int code = params_share(params, "floor", ret_value, fault);
    json_decref(params);
    return code;
}

static void a_share_is_from_0_to_1(void **state)
{
    (void)state;
    struct fault fault = {0};
    double floor = 77.0;
    assert_int_equal(read_share("{}", &floor, &fault), 0);
    assert_near(floor, 77.0, 0.0);
    assert_int_equal(read_share("{'floor': 0}", &floor, &fault), 0);
    assert_near(floor, 0.0, 0.0);
    assert_int_equal(read_share("{'floor': 1}", &floor, &fault), 0);
    assert_near(floor, 1.0, 0.0);
    assert_int_equal(read_share("{'floor': 0.25}", &floor, &fault), 0);
    assert_near(floor, 0.25, 0.0);
}

static void what_is_no_share_is_refused(void **state)
{
    (void)state;
    static const char *const TEXTS[] = {"{'floor': -0.001}", "{'floor': 1.001}", "{'floor': 2}",
                                        "{'floor': '0.5'}", "{'floor': null}"};
    for (size_t i = 0; i < sizeof TEXTS / sizeof TEXTS[0]; i++) {
        struct fault fault = {0};
        double floor = 77.0;
        assert_int_equal(read_share(TEXTS[i], &floor, &fault), FAULT_PARAMS);
        assert_fault(&fault, FAULT_PARAMS, "/floor", "floor is a number from 0 to 1.");
        assert_near(floor, 77.0, 0.0);
    }
}

/* --- flags and choices --- */

static int read_flag(const char *text, bool *ret_value, struct fault *fault)
{
    json_t *params = json_of(text);
    int code = params_flag(params, "why", ret_value, fault);
    json_decref(params);
    return code;
}

static void a_flag_is_true_or_false(void **state)
{
    (void)state;
    struct fault fault = {0};
    bool why = true;
    assert_int_equal(read_flag("{}", &why, &fault), 0);
    assert_true(why);
    assert_int_equal(read_flag("{'why': false}", &why, &fault), 0);
    assert_false(why);
    assert_int_equal(read_flag("{'why': true}", &why, &fault), 0);
    assert_true(why);
    static const char *const TEXTS[] = {"{'why': 1}", "{'why': 'true'}", "{'why': null}"};
    for (size_t i = 0; i < sizeof TEXTS / sizeof TEXTS[0]; i++) {
        fault = (struct fault){0};
        assert_int_equal(read_flag(TEXTS[i], &why, &fault), FAULT_PARAMS);
        assert_fault(&fault, FAULT_PARAMS, "/why", "why is true or false.");
    }
}

static int read_choice(const char *text, size_t *ret_choice, struct fault *fault)
{
    static const char *const CHOICES[] = {"name", "count", "missing", NULL};
    json_t *params = json_of(text);
    int code = params_choice(params, "order", CHOICES, ret_choice, fault);
    json_decref(params);
    return code;
}

static void a_choice_is_told_by_its_place(void **state)
{
    (void)state;
    struct fault fault = {0};
    size_t order = 77;
    assert_int_equal(read_choice("{}", &order, &fault), 0);
    assert_int_equal(order, 77);
    assert_int_equal(read_choice("{'order': 'missing'}", &order, &fault), 0);
    assert_int_equal(order, 2);
    assert_int_equal(read_choice("{'order': 'name'}", &order, &fault), 0);
    assert_int_equal(order, 0);
}

static void what_is_none_of_the_choices_is_refused_with_all_of_them(void **state)
{
    (void)state;
    static const char *const TEXTS[] = {"{'order': 'Name'}", "{'order': ''}", "{'order': 1}",
                                        "{'order': null}"};
    for (size_t i = 0; i < sizeof TEXTS / sizeof TEXTS[0]; i++) {
        struct fault fault = {0};
        size_t order = 77;
        assert_int_equal(read_choice(TEXTS[i], &order, &fault), FAULT_PARAMS);
        assert_fault(&fault, FAULT_PARAMS, "/order",
                     "order is one of \"name\", \"count\", \"missing\".");
        assert_int_equal(order, 77);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(known_members_are_let_through),
        cmocka_unit_test(an_unknown_member_is_named),
        cmocka_unit_test(a_member_that_is_null_is_there),
        cmocka_unit_test(an_absent_text_is_empty),
        cmocka_unit_test(a_text_is_borrowed_from_params),
        cmocka_unit_test(a_text_as_long_as_the_limit_is_taken_and_one_byte_more_is_not),
        cmocka_unit_test(what_is_no_string_is_no_text),
        cmocka_unit_test(a_language_is_a_code),
        cmocka_unit_test(what_is_no_code_is_no_language),
        cmocka_unit_test(a_time_is_written_in_utc),
        cmocka_unit_test(what_is_no_time_is_refused),
        cmocka_unit_test(a_whole_number_may_be_either_bound),
        cmocka_unit_test(what_is_no_whole_number_within_the_bounds_is_refused),
        cmocka_unit_test(a_seq_may_be_as_large_as_json_can_say),
        cmocka_unit_test(a_share_is_from_0_to_1),
        cmocka_unit_test(what_is_no_share_is_refused),
        cmocka_unit_test(a_flag_is_true_or_false),
        cmocka_unit_test(a_choice_is_told_by_its_place),
        cmocka_unit_test(what_is_none_of_the_choices_is_refused_with_all_of_them),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
