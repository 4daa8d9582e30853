/* JSON that is written as it is made; jansson reads it back. */
#include "daemon/json_text.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <jansson.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "tests/unit/repeatable.h"

static char *real_text(double value)
{
    struct json_text text = {0};
    json_text_real(&text, value);
    char *written = json_text_take(&text);
    assert_non_null(written);
    return written;
}

static void assert_real(double value, const char *expected)
{
    char *written = real_text(value);
    assert_string_equal(written, expected);
    free(written);
}

static void reals_are_written_as_one_would_write_them(void **state)
{
    (void)state;
    assert_real(0.05, "0.05");
    assert_real(1.0, "1.0");
    assert_real(-0.25, "-0.25");
    assert_real(1.0 / 3.0, "0.333333333333");
    assert_real(-12.25, "-12.25");
    assert_real(0.29, "0.29");
    assert_real(2.0 / 3.0, "0.666666666666");
    assert_real(0.9999999999999, "0.999999999999");
}

static void a_real_that_is_next_to_nothing_or_large_is_a_real_all_the_same(void **state)
{
    (void)state;
    assert_real(0.0, "0.0");
    assert_real(0x1p-44, "5.6843418860808015e-14");
    assert_real(-0x1p-15, "-3.0517578125e-05");
    assert_real(1000.0, "1000.0");
    assert_real(0x1p60, "1.152921504606847e+18");
}

static void what_is_read_back_is_off_by_one_of_the_last_place_at_most(void **state)
{
    (void)state;
    struct repeatable random = {11};
    for (int i = 0; i < 10000; i++) {
        double size = exp((repeatable_share(&random) - 0.5) * 40.0);
        double value = repeatable_share(&random) < 0.5 ? -size : size;
        char *written = real_text(value);
        json_t *read = json_loads(written, JSON_DECODE_ANY, NULL);
        assert_true(json_is_real(read));
        double off = size - fabs(json_real_value(read));
        assert_true(off > -1e-15 * size && json_real_value(read) * value > 0.0);
        if (size < 1e-4 || size >= 1e3 ? off > 0.0 : off > 1.001e-12) {
            fail_msg("%.17g became %s", value, written);
        }
        json_decref(read);
        free(written);
    }
}

static void whole_numbers_have_all_their_figures(void **state)
{
    (void)state;
    struct json_text text = {0};
    json_text_whole(&text, 0);
    json_text_plain(&text, " ");
    json_text_whole(&text, UINT64_MAX);
    char *written = json_text_take(&text);
    assert_string_equal(written, "0 18446744073709551615");
    free(written);
}

static void strings_come_back_whatever_is_in_them(void **state)
{
    (void)state;
    static const char STRING[] = "\"Fog\\bell\"\n\t\x01 \x1F\x7F K\xC3\xBCste \xF0\x9F\x94\x94";
    struct json_text text = {0};
    json_text_plain(&text, "[");
    json_text_string(&text, STRING, sizeof STRING - 1);
    json_text_plain(&text, ",");
    json_text_string(&text, "", 0);
    json_text_plain(&text, "]");
    char *written = json_text_take(&text);
    assert_non_null(written);
    assert_null(strchr(written, '\n'));
    json_t *read = json_loads(written, 0, NULL);
    assert_int_equal(json_array_size(read), 2);
    assert_string_equal(json_string_value(json_array_get(read, 0)), STRING);
    assert_string_equal(json_string_value(json_array_get(read, 1)), "");
    json_decref(read);
    free(written);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(reals_are_written_as_one_would_write_them),
        cmocka_unit_test(a_real_that_is_next_to_nothing_or_large_is_a_real_all_the_same),
        cmocka_unit_test(what_is_read_back_is_off_by_one_of_the_last_place_at_most),
        cmocka_unit_test(whole_numbers_have_all_their_figures),
        cmocka_unit_test(strings_come_back_whatever_is_in_them),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
