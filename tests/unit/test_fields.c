/* What an item says of itself beside its words. */
#include "daemon/fields.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>

#include "tests/unit/jsons.h"

/* --- what fields may be --- */

static void assert_fields(const char *text)
{
    struct fault fault = {0};
    json_t *fields = json_of(text);
    if (fields_check(fields, "/fields", &fault) != 0) {
        fail_msg("%s: %s", text, fault.message);
    }
    assert_int_equal(fault.code, 0);
    json_decref(fields);
}

static void assert_no_fields(const char *text, const char *field, const char *sentence)
{
    struct fault fault = {0};
    json_t *fields = json_of(text);
    assert_int_equal(fields_check(fields, "/fields", &fault), FAULT_PARAMS);
    assert_int_equal(fault.code, FAULT_PARAMS);
    assert_string_equal(fault.field, field);
    assert_string_equal(fault.message, sentence);
    json_decref(fields);
}

static void strings_numbers_booleans_and_arrays_of_strings_are_fields(void **state)
{
    (void)state;
    assert_fields("{}");
    assert_fields("{'desk': 'harbour', 'year': 1911, 'depth': 3.5, 'sealed': true, 'open': false}");
    assert_fields("{'ports': []}");
    assert_fields("{'ports': ['north quay', '']}");
}

static void fields_are_an_object(void **state)
{
    (void)state;
    static const char SENTENCE[] =
        "fields is an object of strings, numbers, booleans or arrays of strings.";
    assert_no_fields("['desk']", "/fields", SENTENCE);
    assert_no_fields("'desk'", "/fields", SENTENCE);
    assert_no_fields("null", "/fields", SENTENCE);
}

static void a_field_is_neither_null_nor_an_object(void **state)
{
    (void)state;
    static const char SENTENCE[] =
        "A field is a string, a number, a boolean or an array of strings.";
    assert_no_fields("{'desk': null}", "/fields/desk", SENTENCE);
    assert_no_fields("{'year': 1911, 'a/b': {'c': 'd'}}", "/fields/a~1b", SENTENCE);
}

static void an_array_holds_strings_only(void **state)
{
    (void)state;
    static const char SENTENCE[] = "A field's array holds strings only.";
    assert_no_fields("{'ports': ['quay', 'pier', 3]}", "/fields/ports/2", SENTENCE);
    assert_no_fields("{'ports': [['quay']]}", "/fields/ports/0", SENTENCE);
}

/* --- one form for one meaning --- */

static void assert_form(const char *text, const char *expected)
{
    json_t *fields = json_of(text);
    char *form = fields_canonical(fields);
    char *wanted = quoted(expected);
    assert_string_equal(form, wanted);
    free(form);
    free(wanted);
    json_decref(fields);
}

static void members_stand_by_name_without_blanks(void **state)
{
    (void)state;
    assert_form("{ 'year' : 1911 , 'desk' : 'harbour' }", "{'desk':'harbour','year':1911}");
    assert_form("{'desk':'harbour','year':1911}", "{'desk':'harbour','year':1911}");
}

static void the_order_of_an_array_is_kept(void **state)
{
    (void)state;
    assert_form("{'ports': ['quay', 'pier']}", "{'ports':['quay','pier']}");
}

static void no_fields_are_an_empty_text(void **state)
{
    (void)state;
    assert_form("{}", "");
}

/* --- the learner's pairs --- */

/* "name=value;" for each pair. */
static void assert_pairs(struct field_list *list, const char *text, const char *expected)
{
    char found[512] = "";
    size_t used = 0;
    json_t *fields = json_of(text);
    assert_int_equal(field_list_fill(list, fields), 0);
    for (size_t i = 0; i < list->count; i++) {
        used += (size_t)snprintf(found + used, sizeof found - used, "%s=%s;", list->entries[i].name,
                                 list->entries[i].value);
    }
    assert_string_equal(found, expected);
    json_decref(fields);
}

static void every_kind_of_value_becomes_text(void **state)
{
    (void)state;
    struct field_list list = {0};
    assert_pairs(&list, "{'desk': 'harbour', 'year': 1911, 'sealed': true, 'open': false}",
                 "desk=harbour;year=1911;sealed=true;open=false;");
    field_list_deinit(&list);
}

static void each_string_of_an_array_is_a_pair(void **state)
{
    (void)state;
    struct field_list list = {0};
    assert_pairs(&list, "{'ports': ['quay', 'pier'], 'none': []}", "ports=quay;ports=pier;");
    field_list_deinit(&list);
}

/* 0.1 is 0x1.999999999999ap-4, for which 17 digits are enough (common practice: any double). */
static void numbers_keep_all_that_they_say(void **state)
{
    (void)state;
    struct field_list list = {0};
    assert_pairs(&list, "{'a': 9223372036854775807, 'b': -9223372036854775808, 'c': 0.1}",
                 "a=9223372036854775807;b=-9223372036854775808;c=0.10000000000000001;");
    assert_pairs(&list, "{'a': -1.7976931348623157e308}", "a=-1.7976931348623157e+308;");
    field_list_deinit(&list);
}

static void a_list_filled_again_holds_only_the_new(void **state)
{
    (void)state;
    struct field_list list = {0};
    assert_pairs(&list, "{'year': 1911}", "year=1911;");
    assert_pairs(&list, "{'a': 1, 'b': 2, 'c': 3.5, 'd': 4, 'e': 5, 'f': 'six'}",
                 "a=1;b=2;c=3.5;d=4;e=5;f=six;");
    assert_pairs(&list, "{}", "");
    field_list_deinit(&list);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(strings_numbers_booleans_and_arrays_of_strings_are_fields),
        cmocka_unit_test(fields_are_an_object),
        cmocka_unit_test(a_field_is_neither_null_nor_an_object),
        cmocka_unit_test(an_array_holds_strings_only),
        cmocka_unit_test(members_stand_by_name_without_blanks),
        cmocka_unit_test(the_order_of_an_array_is_kept),
        cmocka_unit_test(no_fields_are_an_empty_text),
        cmocka_unit_test(every_kind_of_value_becomes_text),
        cmocka_unit_test(each_string_of_an_array_is_a_pair),
        cmocka_unit_test(numbers_keep_all_that_they_say),
        cmocka_unit_test(a_list_filled_again_holds_only_the_new),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
