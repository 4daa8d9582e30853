/* Drawings: where values lie, and what of them is written. */
#include "client/svg.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

static void assert_at(const struct svg_scale *scale, double value, double expected)
{
    assert_true(fabs(svg_at(scale, value) - expected) < 1e-9);
}

static void values_lie_in_proportion(void **state)
{
    (void)state;
    const struct svg_scale scale = {.from = 0, .to = 4, .start = 100, .end = 20}; /* upwards */
    assert_at(&scale, 0, 100);
    assert_at(&scale, 1, 80);
    assert_at(&scale, 4, 20);
}

static void on_a_logarithmic_scale_each_tenfold_is_as_long(void **state)
{
    (void)state;
    const struct svg_scale scale = {
        .from = 1, .to = 1000, .start = 0, .end = 30, .logarithmic = true};
    assert_at(&scale, 1, 0);
    assert_at(&scale, 10, 10);
    assert_at(&scale, 100, 20);
    const struct svg_scale falling = {
        .from = 1000, .to = 1, .start = 0, .end = 30, .logarithmic = true};
    assert_at(&falling, 10, 20);
}

static void what_lies_beyond_an_end_is_drawn_there(void **state)
{
    (void)state;
    const struct svg_scale plain = {.from = 0, .to = 1, .start = 0, .end = 10};
    const struct svg_scale powers = {
        .from = 1, .to = 10, .start = 0, .end = 10, .logarithmic = true};
    assert_at(&plain, -3, 0);
    assert_at(&plain, 3, 10);
    assert_at(&powers, 0, 0);
    assert_at(&powers, 11, 10);
}

static void a_scale_without_a_length_has_one_place(void **state)
{
    (void)state;
    const struct svg_scale scale = {.from = 3, .to = 3, .start = 7, .end = 9};
    assert_at(&scale, 3, 7);
}

/* 95,322 in five parts: 19,064 each at least, so 20,000. */
static void steps_are_round_and_few(void **state)
{
    (void)state;
    assert_true(svg_step(95322, 5) == 20000);
    assert_true(svg_step(100, 5) == 20);
    assert_true(svg_step(101, 5) == 50);
    assert_true(svg_step(3, 5) == 1);
    assert_true(svg_step(0, 5) == 1);
    assert_true(svg_step(NAN, 5) == 1);
}

static void a_line_is_broken_where_a_value_is_not_known(void **state)
{
    (void)state;
    const double x[] = {0, 1, 2, 3, 4};
    const double y[] = {5, 6, NAN, 7, 8};
    struct html html;
    char *page = NULL;
    size_t length = 0;
    assert_int_equal(html_open(&html), 0);
    svg_path(&html, "curve", x, y, 5);
    assert_int_equal(html_close(&html, &page, &length), 0);
    assert_string_equal(page, "<path class=\"curve\" d=\"M0.0 5.0L1.0 6.0M3.0 7.0L4.0 8.0\"/>\n");
    free(page);
}

static void text_is_escaped_and_cleaned(void **state)
{
    (void)state;
    struct html html;
    char *page = NULL;
    size_t length = 0;
    assert_int_equal(html_open(&html), 0);
    html_text(&html, "<b class='x'>\"Tern\" & \"Auk\"</b>\033\n\xE2\x80\xAE");
    assert_int_equal(html_close(&html, &page, &length), 0);
    assert_string_equal(page, "&lt;b class=&#39;x&#39;&gt;&quot;Tern&quot; &amp; &quot;Auk&quot;"
                              "&lt;/b&gt;\uFFFD \uFFFD");
    assert_int_equal(length, strlen(page));
    free(page);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(values_lie_in_proportion),
        cmocka_unit_test(on_a_logarithmic_scale_each_tenfold_is_as_long),
        cmocka_unit_test(what_lies_beyond_an_end_is_drawn_there),
        cmocka_unit_test(a_scale_without_a_length_has_one_place),
        cmocka_unit_test(steps_are_round_and_few),
        cmocka_unit_test(a_line_is_broken_where_a_value_is_not_known),
        cmocka_unit_test(text_is_escaped_and_cleaned),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
