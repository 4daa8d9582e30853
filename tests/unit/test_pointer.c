/* JSON Pointers, against RFC 6901. */
#include "daemon/pointer.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <string.h>

#include "daemon/fault.h"

static void assert_member(const char *base, const char *name, const char *expected)
{
    char pointer[FAULT_FIELD_BYTES];
    pointer_to_member(pointer, sizeof pointer, base, name);
    assert_string_equal(pointer, expected);
}

/* The members of RFC 6901, section 5, by name; its "/foo/0" is an element. */
static void the_examples_of_rfc_6901_are_written_as_it_has_them(void **state)
{
    (void)state;
    char pointer[FAULT_FIELD_BYTES];
    assert_member("", "foo", "/foo");
    pointer_to_element(pointer, sizeof pointer, "/foo", 0);
    assert_string_equal(pointer, "/foo/0");
    assert_member("", "", "/");
    assert_member("", "a/b", "/a~1b");
    assert_member("", "c%d", "/c%d");
    assert_member("", "e^f", "/e^f");
    assert_member("", "g|h", "/g|h");
    assert_member("", "i\\j", "/i\\j");
    assert_member("", "k\"l", "/k\"l");
    assert_member("", " ", "/ ");
    assert_member("", "m~n", "/m~0n");
}

/* RFC 6901, section 4: ~01 is ~1 and not a slash, so ~ must be escaped on its own. */
static void a_name_that_looks_escaped_is_escaped_again(void **state)
{
    (void)state;
    assert_member("", "~1", "/~01");
    assert_member("", "~0/", "/~00~1");
}

static void a_pointer_goes_on_behind_its_base(void **state)
{
    (void)state;
    char pointer[FAULT_FIELD_BYTES];
    assert_member("/fields", "harbour/quay", "/fields/harbour~1quay");
    pointer_to_element(pointer, sizeof pointer, "/fields/desk", 12);
    assert_string_equal(pointer, "/fields/desk/12");
}

static void what_does_not_fit_is_cut_and_ended(void **state)
{
    (void)state;
    char pointer[6];
    pointer_to_member(pointer, sizeof pointer, "", "lantern");
    assert_string_equal(pointer, "/lan"); /* the room for an escape is kept free */
    pointer_to_member(pointer, sizeof pointer, "/lantern", "lens");
    assert_string_equal(pointer, "/lant");
    pointer_to_element(pointer, sizeof pointer, "/log", 77);
    assert_string_equal(pointer, "/log/");
}

static void an_escape_is_never_cut_in_two(void **state)
{
    (void)state;
    char pointer[16];
    for (size_t size = 2; size <= sizeof pointer; size++) {
        memset(pointer, 'x', sizeof pointer);
        pointer_to_member(pointer, size, "", "//////////");
        size_t length = strlen(pointer);
        assert_true(length < size);
        assert_int_equal(length % 2, 1); /* the first slash, then pairs */
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_examples_of_rfc_6901_are_written_as_it_has_them),
        cmocka_unit_test(a_name_that_looks_escaped_is_escaped_again),
        cmocka_unit_test(a_pointer_goes_on_behind_its_base),
        cmocka_unit_test(what_does_not_fit_is_cut_and_ended),
        cmocka_unit_test(an_escape_is_never_cut_in_two),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
