#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>

#include "client/bar.h"
#include "client/text.h"

static void assert_bar(double share, unsigned columns, bool unicode, const char *expected)
{
    char bar[BAR_BYTES];
    bar_draw(share, columns, unicode, bar);
    assert_string_equal(bar, expected);
}

static void a_bar_grows_by_eighths_of_a_column(void **state)
{
    (void)state;
    assert_bar(.5, 4, true, "██");
    assert_bar(.5 + 1.0 / 32, 4, true, "██▏");
    assert_bar(1.0 - 1.0 / 32, 4, true, "███▉");
    assert_bar(1, 4, true, "████");
}

static void a_share_above_nothing_shows_at_least_a_mark(void **state)
{
    (void)state;
    assert_bar(1e-9, 10, true, "▏");
    assert_bar(1e-9, 10, false, "#");
    assert_bar(0, 10, true, "");
    assert_bar(0, 10, false, "");
}

static void a_share_out_of_range_is_drawn_as_the_nearest_one(void **state)
{
    (void)state;
    assert_bar(7, 3, true, "███");
    assert_bar(-1, 3, true, "");
    assert_bar(NAN, 3, true, "");
    assert_bar(INFINITY, 3, false, "###");
}

static void without_unicode_a_bar_is_made_of_whole_marks(void **state)
{
    (void)state;
    assert_bar(.5, 4, false, "##");
    assert_bar(.66, 4, false, "###");
}

static void a_bar_never_takes_more_than_its_columns(void **state)
{
    (void)state;
    char bar[BAR_BYTES];
    for (int i = 0; i <= 1000; i++) {
        bar_draw(i / 1000.0, BAR_COLUMNS_MOST, true, bar);
        assert_true(text_width(bar) <= BAR_COLUMNS_MOST);
    }
}

/* Of ten columns: full up to the low end, dark to the share, light to the high end. */
static void an_interval_is_drawn_around_the_end_of_its_bar(void **state)
{
    (void)state;
    char bar[BAR_BYTES];
    bar_draw_between(.5, .3, .8, 10, true, bar);
    assert_string_equal(bar, "███▓▓░░░");
    bar_draw_between(.5, .3, .8, 10, false, bar);
    assert_string_equal(bar, "###==---");
}

static void without_an_interval_the_bar_is_a_plain_one(void **state)
{
    (void)state;
    char bar[BAR_BYTES];
    bar_draw_between(.5, NAN, .8, 4, true, bar);
    assert_string_equal(bar, "██");
    bar_draw_between(NAN, .2, .8, 4, true, bar);
    assert_string_equal(bar, "");
}

static void an_interval_never_takes_more_than_its_columns(void **state)
{
    (void)state;
    char bar[BAR_BYTES];
    bar_draw_between(.9, .5, 7, BAR_COLUMNS_MOST, true, bar);
    assert_int_equal(text_width(bar), BAR_COLUMNS_MOST);
    bar_draw_between(.01, .001, .012, 10, true, bar); /* all of it less than half a column */
    assert_string_equal(bar, "▓");
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_bar_grows_by_eighths_of_a_column),
        cmocka_unit_test(a_share_above_nothing_shows_at_least_a_mark),
        cmocka_unit_test(a_share_out_of_range_is_drawn_as_the_nearest_one),
        cmocka_unit_test(without_unicode_a_bar_is_made_of_whole_marks),
        cmocka_unit_test(a_bar_never_takes_more_than_its_columns),
        cmocka_unit_test(an_interval_is_drawn_around_the_end_of_its_bar),
        cmocka_unit_test(without_an_interval_the_bar_is_a_plain_one),
        cmocka_unit_test(an_interval_never_takes_more_than_its_columns),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
