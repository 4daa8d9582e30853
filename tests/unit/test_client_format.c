/* Figures for people, what is not known among them. */
#include "client/format.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>

static void amounts_have_a_decimal_only_where_they_are_small(void **state)
{
    char out[FORMAT_BYTES];
    (void)state;
    assert_string_equal(format_amount(0, out), "0");
    assert_string_equal(format_amount(7, out), "7");
    assert_string_equal(format_amount(3.21, out), "3.2");
    assert_string_equal(format_amount(9.96, out), "10");
    assert_string_equal(format_amount(92236.7, out), "92,237");
}

static void about_keeps_two_figures(void **state)
{
    char out[FORMAT_BYTES];
    (void)state;
    assert_string_equal(format_about(92237, out), "92,000");
    assert_string_equal(format_about(995, out), "1,000");
    assert_string_equal(format_about(134.4, out), "130");
    assert_string_equal(format_about(57.4, out), "57");
    assert_string_equal(format_about(0, out), "0");
}

static void percentages_are_finer_near_their_ends(void **state)
{
    char out[FORMAT_BYTES];
    (void)state;
    assert_string_equal(format_percent(.734, out), "73 %");
    assert_string_equal(format_percent(.0123, out), "1.2 %");
    assert_string_equal(format_percent(.9967, out), "99.7 %");
    assert_string_equal(format_percent(0, out), "0 %");
    assert_string_equal(format_percent(1, out), "100 %");
}

static void a_change_has_its_sign(void **state)
{
    char out[FORMAT_BYTES];
    (void)state;
    assert_string_equal(format_change(.0512, out), "+5.1 %");
    assert_string_equal(format_change(-.25, out), "-25 %");
    assert_string_equal(format_between(.7, .756, out), "0.70 to 0.76");
    assert_string_equal(format_figure(.71249, out), "0.712");
}

static void what_is_not_known_is_a_dash(void **state)
{
    char out[FORMAT_BYTES];
    (void)state;
    assert_string_equal(format_amount(NAN, out), "-");
    assert_string_equal(format_about(NAN, out), "-");
    assert_string_equal(format_percent(NAN, out), "-");
    assert_string_equal(format_change(INFINITY, out), "-");
    assert_string_equal(format_between(.5, NAN, out), "-");
    assert_string_equal(format_figure(NAN, out), "-");
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(amounts_have_a_decimal_only_where_they_are_small),
        cmocka_unit_test(about_keeps_two_figures),
        cmocka_unit_test(percentages_are_finer_near_their_ends),
        cmocka_unit_test(a_change_has_its_sign),
        cmocka_unit_test(what_is_not_known_is_a_dash),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
