/* Names (ids, tags) and lists of names in a request. */
#include "daemon/params.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>

#include "tests/unit/jsons.h"

static void assert_fault(const struct fault *fault, const char *field, const char *sentence)
{
    assert_int_equal(fault->code, FAULT_PARAMS);
    assert_string_equal(fault->field, field);
    assert_string_equal(fault->message, sentence);
}

/* --- one name --- */

static void assert_name(const char *text)
{
    struct fault fault = {0};
    struct store_text name = {0};
    json_t *params = json_pack("{s:s}", "id", text);
    if (params_name(params, "id", &name, &fault) != 0) {
        fail_msg("%s: %s", text, fault.message);
    }
    assert_int_equal(name.size, strlen(text));
    assert_memory_equal(name.data, text, name.size);
    json_decref(params);
}

/* Takes the reference to `value`. */
static void assert_no_name(json_t *value, const char *sentence)
{
    struct fault fault = {0};
    struct store_text name = {.size = 77};
    json_t *params = json_pack("{s:o}", "id", value);
    assert_non_null(params);
    assert_int_equal(params_name(params, "id", &name, &fault), FAULT_PARAMS);
    assert_fault(&fault, "/id", sentence);
    assert_int_equal(name.size, 77);
    json_decref(params);
}

static void a_name_is_1_to_255_bytes(void **state)
{
    (void)state;
    char text[257];
    memset(text, 'a', sizeof text);
    text[256] = '\0';
    assert_no_name(json_string(""), "id is 1 to 255 bytes of UTF-8.");
    assert_no_name(json_string(text), "id is 1 to 255 bytes of UTF-8.");
    text[255] = '\0';
    assert_name(text);
    assert_name("a");
}

static void a_name_is_a_string(void **state)
{
    (void)state;
    assert_no_name(json_integer(1911), "id is a string.");
    assert_no_name(json_null(), "id is a string.");
    assert_no_name(json_array(), "id is a string.");
}

static void a_name_that_must_be_there_is_missed(void **state)
{
    (void)state;
    struct fault fault = {0};
    struct store_text name = {.size = 77};
    json_t *params = json_object();
    assert_int_equal(params_name(params, "id", &name, &fault), FAULT_PARAMS);
    assert_fault(&fault, "/id", "id is missing.");
    assert_int_equal(name.size, 77);
    json_decref(params);
}

static void an_optional_name_may_be_absent_but_not_wrong(void **state)
{
    (void)state;
    struct fault fault = {0};
    struct store_text name = {.size = 77};
    json_t *params = json_of("{'editor': 'h. quill', 'tagger': ''}");
    assert_int_equal(params_optional_name(params, "checker", &name, &fault), 0);
    assert_int_equal(name.size, 0);
    assert_int_equal(params_optional_name(params, "editor", &name, &fault), 0);
    assert_int_equal(name.size, 8);
    assert_int_equal(params_optional_name(params, "tagger", &name, &fault), FAULT_PARAMS);
    assert_fault(&fault, "/tagger", "tagger is 1 to 255 bytes of UTF-8.");
    json_decref(params);
}

/* Unicode's general category Cc: U+0000 to U+001F and U+007F to U+009F. (U+0000 never comes this
 * far: a line with it is not parsed.) */
static void control_characters_are_in_no_name(void **state)
{
    (void)state;
    char text[16];
    for (unsigned code = 1; code < 0x20; code++) {
        (void)snprintf(text, sizeof text, "a%cb", (char)code);
        assert_no_name(json_string(text), "id holds no control characters.");
    }
    for (unsigned code = 0x80; code < 0xA0; code++) {
        (void)snprintf(text, sizeof text, "a\xC2%cb", (char)code);
        assert_no_name(json_string(text), "id holds no control characters.");
    }
    assert_no_name(json_string("a\x7F"), "id holds no control characters.");
}

static void characters_next_to_the_control_characters_are_allowed(void **state)
{
    (void)state;
    assert_name(" ");
    assert_name("~");
    assert_name("\xC2\xA0"); /* U+00A0, the no-break space */
    assert_name("\xC3\x80"); /* U+00C0: C3 80, whose second byte alone is no C1 control */
    assert_name("log/1911?page=3&x=\"\\");
}

/* UAX #15, figure 4 and table 1 (from memory): the Angstrom sign U+212B and A with a ring above
 * (U+0041 U+030A) both are U+00C5 in NFC; the ligature U+FB01 stays, it is compatible only. */
static void a_name_is_in_nfc(void **state)
{
    (void)state;
    static const char SENTENCE[] = "id is in Unicode's Normalization Form C (NFC).";
    assert_no_name(json_string("\xE2\x84\xAB"), SENTENCE);
    assert_no_name(json_string("A\xCC\x8A"), SENTENCE);
    assert_name("\xC3\x85");
    assert_name("\xEF\xAC\x81");
}

/* --- lists of names --- */

struct list {
    json_t *params;
    struct params_names names;
    struct fault fault;
};

static int read_list(struct list *list, const char *text)
{
    *list = (struct list){.params = json_of(text)};
    return params_names(list->params, "tags", &list->names, &list->fault);
}

static void free_list(struct list *list)
{
    params_names_deinit(&list->names);
    json_decref(list->params);
}

/* "name@place;" for each of the set. */
static void assert_list(const char *text, const char *expected)
{
    struct list list;
    char found[256] = "";
    size_t used = 0;
    assert_int_equal(read_list(&list, text), 0);
    for (size_t i = 0; i < list.names.count; i++) {
        struct store_text name = list.names.names[i];
        used += (size_t)snprintf(found + used, sizeof found - used, "%.*s@%zu;", (int)name.size,
                                 name.data, list.names.given_at[i]);
    }
    assert_string_equal(found, expected);
    free_list(&list);
}

static void a_list_is_ordered_by_bytes_and_knows_where_each_was(void **state)
{
    (void)state;
    assert_list("{'tags': ['wreck', 'fog', 'bell']}", "bell@2;fog@1;wreck@0;");
    assert_list("{'tags': ['fog bank', 'fog', 'Fog', 'ö']}", "Fog@2;fog@1;fog bank@0;ö@3;");
}

static void a_name_given_twice_counts_once_at_its_first_place(void **state)
{
    (void)state;
    assert_list("{'tags': ['fog', 'bell', 'fog', 'fog', 'bell']}", "bell@1;fog@0;");
}

static void no_list_and_an_empty_one_are_the_same(void **state)
{
    (void)state;
    assert_list("{}", "");
    assert_list("{'tags': []}", "");
}

static void assert_no_list(const char *text, const char *field, const char *sentence)
{
    struct list list;
    assert_int_equal(read_list(&list, text), FAULT_PARAMS);
    assert_fault(&list.fault, field, sentence);
    assert_null(list.names.names);
    free_list(&list);
}

static void what_is_no_list_is_refused(void **state)
{
    (void)state;
    assert_no_list("{'tags': 'fog'}", "/tags", "tags is an array of strings.");
    assert_no_list("{'tags': {'fog': true}}", "/tags", "tags is an array of strings.");
    assert_no_list("{'tags': null}", "/tags", "tags is an array of strings.");
}

static void the_first_wrong_name_of_a_list_is_told(void **state)
{
    (void)state;
    assert_no_list("{'tags': ['fog', '', 7]}", "/tags/1",
                   "Each of tags is 1 to 255 bytes of UTF-8.");
    assert_no_list("{'tags': ['fog', 7]}", "/tags/1", "Each of tags is a string.");
    assert_no_list("{'tags': ['a\\tb']}", "/tags/0", "Each of tags holds no control characters.");
    assert_no_list("{'tags': ['\xE2\x84\xAB']}", "/tags/0",
                   "Each of tags is in Unicode's Normalization Form C (NFC).");
}

static void a_set_says_what_it_holds(void **state)
{
    (void)state;
    struct list list;
    assert_int_equal(read_list(&list, "{'tags': ['wreck', 'fog', 'fog bell']}"), 0);
    assert_true(params_names_hold(&list.names, (struct store_text){"fog", 3}));
    assert_true(params_names_hold(&list.names, (struct store_text){"fog bell", 8}));
    assert_true(params_names_hold(&list.names, (struct store_text){"wreckage", 5}));
    assert_false(params_names_hold(&list.names, (struct store_text){"fo", 2}));
    assert_false(params_names_hold(&list.names, (struct store_text){"fogs", 4}));
    assert_false(params_names_hold(&list.names, (struct store_text){"", 0}));
    free_list(&list);
    const struct params_names none = {0};
    assert_false(params_names_hold(&none, (struct store_text){"fog", 3}));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_name_is_1_to_255_bytes),
        cmocka_unit_test(a_name_is_a_string),
        cmocka_unit_test(a_name_that_must_be_there_is_missed),
        cmocka_unit_test(an_optional_name_may_be_absent_but_not_wrong),
        cmocka_unit_test(control_characters_are_in_no_name),
        cmocka_unit_test(characters_next_to_the_control_characters_are_allowed),
        cmocka_unit_test(a_name_is_in_nfc),
        cmocka_unit_test(a_list_is_ordered_by_bytes_and_knows_where_each_was),
        cmocka_unit_test(a_name_given_twice_counts_once_at_its_first_place),
        cmocka_unit_test(no_list_and_an_empty_one_are_the_same),
        cmocka_unit_test(what_is_no_list_is_refused),
        cmocka_unit_test(the_first_wrong_name_of_a_list_is_told),
        cmocka_unit_test(a_set_says_what_it_holds),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
