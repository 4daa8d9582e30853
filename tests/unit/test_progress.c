#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "client/progress.h"
#include "client/text.h"

static void assert_line(const struct progress_view *view, size_t columns, const char *expected)
{
    char line[PROGRESS_BYTES];
    progress_format(view, columns, true, line);
    assert_string_equal(line, expected);
    assert_true(text_width(line) <= columns);
}

static void the_line_tells_share_count_rate_and_time_left(void **state)
{
    (void)state;
    const struct progress_view view = {
        .count = 12345, .done = 1, .total = 4, .rate = 2310.4, .seconds_left = 68};
    assert_line(&view, 79,
                "██████                    25 %   12,345 items   2,310 a second   1 min 8 s left");
}

static void without_a_known_size_there_is_no_share_and_no_time_left(void **state)
{
    (void)state;
    const struct progress_view view = {.count = 1, .rate = 2, .seconds_left = -1};
    assert_line(&view, 79, "1 item   2 a second");
}

static void before_the_rate_is_known_the_count_stands_alone(void **state)
{
    (void)state;
    const struct progress_view view = {.count = 0, .rate = -1, .seconds_left = -1};
    assert_line(&view, 79, "0 items");
}

static void what_is_counted_may_be_something_else(void **state)
{
    (void)state;
    const struct progress_view one = {.count = 1, .noun = "change", .rate = -1, .seconds_left = -1};
    const struct progress_view two = {.count = 2, .noun = "change", .rate = -1, .seconds_left = -1};
    assert_line(&one, 79, "1 change");
    assert_line(&two, 79, "2 changes");
}

static void bytes_are_counted_as_sizes(void **state)
{
    (void)state;
    const struct progress_view view = {.count = 12345678,
                                       .is_size = true,
                                       .done = 1,
                                       .total = 4,
                                       .rate = 4.2e6,
                                       .seconds_left = 8};
    assert_line(&view, 79, "██████                    25 %   12.3 MB   4.2 MB a second   8 s left");
}

static void what_does_not_fit_a_narrow_terminal_is_left_out(void **state)
{
    (void)state;
    const struct progress_view view = {
        .count = 12345, .done = 1, .total = 4, .rate = 2310, .seconds_left = 68};
    assert_line(&view, 40, " 25 %   12,345 items   2,310 a second");
    assert_line(&view, 22, " 25 %   12,345 items");
    assert_line(&view, 3, "");
}

/* A terminal as the program sees one, written into memory, and a clock that the test turns. */
struct fixture {
    struct screen screen;
    struct progress progress;
    char *text;
    size_t length;
};

static int set_up(void **state)
{
    static struct fixture fixture;
    fixture = (struct fixture){.screen = {.renews = true, .unicode = true}};
    fixture.screen.stream = open_memstream(&fixture.text, &fixture.length);
    *state = &fixture;
    return fixture.screen.stream ? 0 : -1;
}

static int tear_down(void **state)
{
    struct fixture *fixture = *state;
    int result = fclose(fixture->screen.stream);
    free(fixture->text);
    return result;
}

/* What was written since the last call; valid until the next one. */
static const char *written(struct fixture *fixture)
{
    static char text[4096];
    assert_int_equal(fflush(fixture->screen.stream), 0);
    assert_true(fixture->length < sizeof text);
    memcpy(text, fixture->text, fixture->length);
    text[fixture->length] = '\0';
    rewind(fixture->screen.stream);
    return text;
}

static void the_line_renews_itself_at_most_ten_times_a_second(void **state)
{
    struct fixture *fixture = *state;
    progress_init(&fixture->progress, &fixture->screen, 0, 1000);
    progress_update(&fixture->progress, 1, 0, 1000);
    assert_string_equal(written(fixture), "\r1 item\033[K");
    progress_update(&fixture->progress, 2, 0, 1099);
    assert_string_equal(written(fixture), "");
    progress_update(&fixture->progress, 3, 0, 1100);
    assert_string_equal(written(fixture), "\r3 items\033[K");
}

static void rate_and_time_left_follow_the_clock(void **state)
{
    struct fixture *fixture = *state;
    progress_init(&fixture->progress, &fixture->screen, 1000, 0);
    progress_update(&fixture->progress, 0, 0, 0);
    (void)written(fixture);
    /* 200 items and a quarter of the bytes in two seconds: 100 a second, six seconds more */
    progress_update(&fixture->progress, 200, 250, 2000);
    assert_non_null(strstr(written(fixture), " 25 %   200 items   100 a second   6 s left"));
}

static void the_line_is_taken_away_before_other_words(void **state)
{
    struct fixture *fixture = *state;
    progress_init(&fixture->progress, &fixture->screen, 0, 0);
    progress_clear(&fixture->progress);
    assert_string_equal(written(fixture), "");
    progress_update(&fixture->progress, 1, 0, 0);
    (void)written(fixture);
    progress_clear(&fixture->progress);
    assert_string_equal(written(fixture), "\r\033[K");
    progress_clear(&fixture->progress);
    assert_string_equal(written(fixture), "");
}

static void nothing_is_written_to_what_is_no_terminal(void **state)
{
    struct fixture *fixture = *state;
    fixture->screen.renews = false;
    progress_init(&fixture->progress, &fixture->screen, 10, 0);
    progress_update(&fixture->progress, 1, 1, 0);
    progress_update(&fixture->progress, 2, 2, 5000);
    progress_clear(&fixture->progress);
    assert_string_equal(written(fixture), "");
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_line_tells_share_count_rate_and_time_left),
        cmocka_unit_test(without_a_known_size_there_is_no_share_and_no_time_left),
        cmocka_unit_test(before_the_rate_is_known_the_count_stands_alone),
        cmocka_unit_test(what_is_counted_may_be_something_else),
        cmocka_unit_test(bytes_are_counted_as_sizes),
        cmocka_unit_test(what_does_not_fit_a_narrow_terminal_is_left_out),
        cmocka_unit_test_setup_teardown(the_line_renews_itself_at_most_ten_times_a_second, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(rate_and_time_left_follow_the_clock, set_up, tear_down),
        cmocka_unit_test_setup_teardown(the_line_is_taken_away_before_other_words, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(nothing_is_written_to_what_is_no_terminal, set_up,
                                        tear_down),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
