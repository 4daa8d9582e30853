/* What a request is refused with: the first fault stands, whole characters, no more than fits. */
#include "daemon/fault.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>

#include <cmocka.h>

static void a_fault_has_code_field_and_sentence(void **state)
{
    (void)state;
    struct fault fault = {0};
    assert_int_equal(fault_set(&fault, FAULT_PARAMS, "/tags/2", "tag %d is empty", 3), -32602);
    assert_int_equal(fault.code, FAULT_PARAMS);
    assert_string_equal(fault.field, "/tags/2");
    assert_string_equal(fault.message, "tag 3 is empty");
}

static void without_a_member_to_blame_the_field_is_empty(void **state)
{
    (void)state;
    struct fault fault = {0};
    assert_int_equal(fault_set(&fault, FAULT_STORE, NULL, "full"), -32005);
    assert_string_equal(fault.field, "");
}

static void the_first_fault_wins(void **state)
{
    (void)state;
    struct fault fault = {0};
    (void)fault_set(&fault, FAULT_LIMIT, "/text", "too long");
    assert_int_equal(fault_set(&fault, FAULT_PARAMS, "/id", "wrong"), FAULT_LIMIT);
    assert_int_equal(fault.code, FAULT_LIMIT);
    assert_string_equal(fault.field, "/text");
    assert_string_equal(fault.message, "too long");
}

/* The codes of JSON-RPC 2.0 (section 5.1 of the specification), then the contract's own. */
static void the_codes_are_those_of_the_contract(void **state)
{
    (void)state;
    assert_int_equal(FAULT_PARSE, -32700);
    assert_int_equal(FAULT_REQUEST, -32600);
    assert_int_equal(FAULT_METHOD, -32601);
    assert_int_equal(FAULT_PARAMS, -32602);
    assert_int_equal(FAULT_INTERNAL, -32603);
    assert_int_equal(FAULT_NOT_FOUND, -32001);
    assert_int_equal(FAULT_VOCABULARY, -32002);
    assert_int_equal(FAULT_LIMIT, -32003);
    assert_int_equal(FAULT_FORBIDDEN, -32004);
    assert_int_equal(FAULT_STORE, -32005);
    assert_int_equal(FAULT_STOPPING, -32006);
}

/* `lead` letters, then a character's bytes, and more than fits behind. */
static const char *long_text(size_t lead, const char *character)
{
    static char text[2000];
    memset(text, 'x', sizeof text - 1);
    for (size_t i = 0; character[i] != '\0'; i++) {
        text[lead + i] = character[i];
    }
    return text;
}

/* That a message is cut so that `kept` bytes are left, whatever part of the character fits. */
static void assert_cut(const char *character)
{
    size_t size = strlen(character);
    for (size_t fits = 0; fits <= size; fits++) {
        struct fault fault = {0};
        size_t lead = FAULT_MESSAGE_BYTES - 1 - fits;
        (void)fault_set(&fault, FAULT_PARAMS, NULL, "%s", long_text(lead, character));
        assert_int_equal(strlen(fault.message), fits == size ? lead + size : lead);
    }
}

static void a_message_is_cut_at_a_characters_edge(void **state)
{
    (void)state;
    assert_cut("x");
    assert_cut("\xC3\xA9");         /* U+00E9, two bytes */
    assert_cut("\xE2\x9A\x93");     /* U+2693, three */
    assert_cut("\xF0\x9F\x8C\x8A"); /* U+1F30A, four */
}

static void a_field_is_cut_at_a_characters_edge(void **state)
{
    (void)state;
    struct fault fault = {0};
    size_t lead = FAULT_FIELD_BYTES - 1 - 2;
    (void)fault_set(&fault, FAULT_PARAMS, long_text(lead, "\xE2\x9A\x93"), "wrong");
    assert_int_equal(strlen(fault.field), lead);
    assert_string_equal(fault.message, "wrong");
}

static void a_text_that_just_fits_is_whole(void **state)
{
    (void)state;
    struct fault fault = {0};
    char text[FAULT_MESSAGE_BYTES];
    memset(text, 'x', sizeof text);
    memcpy(text + sizeof text - 4, "\xE2\x9A\x93", 4);
    (void)fault_set(&fault, FAULT_PARAMS, NULL, "%s", text);
    assert_string_equal(fault.message, text);
}

/* A line end, an escape sequence of terminals, DEL; U+0085 and U+009F are C2 85 and C2 9F. What
 * stands beside them (U+00A0, C2 A0) stays. */
static void a_message_holds_no_control_characters(void **state)
{
    (void)state;
    struct fault fault = {0};
    (void)fault_set(&fault, FAULT_METHOD, "/a\nb", "There is no '%s'.",
                    "a\n\x1b[2J\x7F\xC2\x85\xC2\x9F\xC2\xA0\xC3\x85");
    assert_string_equal(fault.message, "There is no 'a??[2J?????\xC2\xA0\xC3\x85'.");
    assert_string_equal(fault.field, "/a\nb"); /* where it points to */
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_fault_has_code_field_and_sentence),
        cmocka_unit_test(without_a_member_to_blame_the_field_is_empty),
        cmocka_unit_test(the_first_fault_wins),
        cmocka_unit_test(the_codes_are_those_of_the_contract),
        cmocka_unit_test(a_message_is_cut_at_a_characters_edge),
        cmocka_unit_test(a_field_is_cut_at_a_characters_edge),
        cmocka_unit_test(a_text_that_just_fits_is_whole),
        cmocka_unit_test(a_message_holds_no_control_characters),
    };
    return cmocka_run_group_tests_name("fault", tests, NULL, NULL);
}
