#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdlib.h>
#include <string.h>

#include "client/format.h"
#include "client/text.h"

static void assert_clean(const char *text, enum text_lines lines, const char *expected)
{
    char *clean = text_clean(text, lines);
    assert_non_null(clean);
    assert_string_equal(clean, expected);
    free(clean);
}

static void control_characters_never_pass(void **state)
{
    (void)state;
    assert_clean("a\033[31mb", TEXT_ONE_LINE, "a\uFFFD[31mb");
    assert_clean("a\xC2\x9B"
                 "31mb",
                 TEXT_ONE_LINE, "a\uFFFD31mb"); /* CSI as one character */
    assert_clean("a\x7F\r!", TEXT_ONE_LINE, "a\uFFFD\uFFFD!");
}

static void marks_that_turn_the_direction_of_writing_never_pass(void **state)
{
    (void)state;
    assert_clean("a\u202Eb\u2066c", TEXT_ONE_LINE, "a\uFFFDb\uFFFDc");
}

static void bytes_that_are_not_utf8_are_replaced_one_by_one(void **state)
{
    (void)state;
    assert_clean("a\xFF\xC3", TEXT_ONE_LINE, "a\uFFFD\uFFFD");
}

static void line_ends_become_spaces_or_stay(void **state)
{
    (void)state;
    assert_clean("a\nb\tc\u2028d", TEXT_ONE_LINE, "a b c d");
    assert_clean("a\r\nb\tc\u2029d", TEXT_KEEP_LINES, "a\nb c\nd");
}

static void wide_characters_take_two_columns_and_combining_ones_none(void **state)
{
    (void)state;
    assert_int_equal(text_width("abc"), 3);
    assert_int_equal(text_width("灯台"), 4);
    assert_int_equal(text_width("e\u0301"), 1);
    assert_int_equal(text_width(""), 0);
}

static void a_text_is_cut_only_at_the_edge_of_a_character(void **state)
{
    (void)state;
    size_t columns = 9;
    assert_int_equal(text_fit("灯台", 6, 3, &columns), 3);
    assert_int_equal(columns, 2);
    /* an e with its accent as a character of its own stays whole */
    assert_int_equal(text_fit("ae\u0301b", 5, 2, &columns), 4);
    assert_int_equal(columns, 2);
    assert_int_equal(text_fit("ab", 2, 9, &columns), 2);
    assert_int_equal(columns, 2);
}

static void lines_break_between_words(void **state)
{
    (void)state;
    size_t next = 0;
    const char *text = "the fog  signal\nnext";
    assert_int_equal(text_line(text, 9, &next), 7);
    assert_int_equal(next, 9);
    assert_int_equal(text_line(text + 9, 9, &next), 6);
    assert_int_equal(next, 7);
    assert_int_equal(text_line(text + 16, 9, &next), 4);
    assert_int_equal(next, 4);
}

static void a_word_longer_than_a_line_is_cut(void **state)
{
    (void)state;
    size_t next = 0;
    assert_int_equal(text_line("lighthouse", 4, &next), 4);
    assert_int_equal(next, 4);
    /* however narrow, a line always takes something */
    assert_int_equal(text_line("灯台", 1, &next), 3);
    assert_int_equal(next, 3);
}

static void an_empty_line_stays_one_line(void **state)
{
    (void)state;
    size_t next = 0;
    assert_int_equal(text_line("\nb", 10, &next), 0);
    assert_int_equal(next, 1);
}

static void the_first_bad_byte_is_named(void **state)
{
    (void)state;
    size_t at = 99;
    assert_true(text_is_utf8("a\u00E9", 3, &at));
    assert_int_equal(at, 99);
    assert_false(text_is_utf8("a\u00E9\xE9", 4, &at));
    assert_int_equal(at, 3);
}

static void figures_read_the_same_everywhere(void **state)
{
    (void)state;
    char out[FORMAT_BYTES];
    assert_string_equal(format_count(0, out), "0");
    assert_string_equal(format_count(999, out), "999");
    assert_string_equal(format_count(1000, out), "1,000");
    assert_string_equal(format_count(-1234567, out), "-1,234,567");
    assert_string_equal(format_count(INT64_MIN, out), "-9,223,372,036,854,775,808");
    assert_string_equal(format_size(999, out), "999 bytes");
    assert_string_equal(format_size(1234567, out), "1.2 MB");
    assert_string_equal(format_size(999960, out), "1.0 MB");
    assert_string_equal(format_duration(59.4, out), "59 s");
    assert_string_equal(format_duration(3725, out), "1 h 2 min");
    assert_string_equal(format_duration(1e300, out), "999 d 0 h");
    assert_string_equal(format_share(.8449, out), "0.84");
    assert_string_equal(format_share(.0044, out), "0.004");
    assert_string_equal(format_share(1, out), "1.00");
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(control_characters_never_pass),
        cmocka_unit_test(marks_that_turn_the_direction_of_writing_never_pass),
        cmocka_unit_test(bytes_that_are_not_utf8_are_replaced_one_by_one),
        cmocka_unit_test(line_ends_become_spaces_or_stay),
        cmocka_unit_test(wide_characters_take_two_columns_and_combining_ones_none),
        cmocka_unit_test(a_text_is_cut_only_at_the_edge_of_a_character),
        cmocka_unit_test(lines_break_between_words),
        cmocka_unit_test(a_word_longer_than_a_line_is_cut),
        cmocka_unit_test(an_empty_line_stays_one_line),
        cmocka_unit_test(the_first_bad_byte_is_named),
        cmocka_unit_test(figures_read_the_same_everywhere),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
