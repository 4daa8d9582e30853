/* Lines out of bytes, whatever the pieces they come in. */
#include "daemon/lines.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <string.h>

enum {
    LIMIT = 10
};

struct fixture {
    struct lines lines;
    char *line;
    size_t length;
    size_t taken;
};

static int set_up(void **state)
{
    static struct fixture fixture;
    fixture = (struct fixture){0};
    lines_init(&fixture.lines, LIMIT);
    *state = &fixture;
    return 0;
}

static int tear_down(void **state)
{
    struct fixture *fixture = *state;
    lines_deinit(&fixture->lines);
    return 0;
}

static void put_bytes(struct fixture *fixture, const char *bytes, size_t count)
{
    char *room = lines_room(&fixture->lines, count);
    assert_non_null(room);
    memcpy(room, bytes, count);
    lines_added(&fixture->lines, count);
}

static void put(struct fixture *fixture, const char *text)
{
    put_bytes(fixture, text, strlen(text));
}

static enum lines_found next(struct fixture *fixture)
{
    return lines_next(&fixture->lines, &fixture->line, &fixture->length, &fixture->taken);
}

static enum lines_found last(struct fixture *fixture)
{
    return lines_last(&fixture->lines, &fixture->line, &fixture->length, &fixture->taken);
}

static void assert_line(struct fixture *fixture, const char *expected, size_t expected_taken)
{
    assert_int_equal(next(fixture), LINES_LINE);
    assert_string_equal(fixture->line, expected);
    assert_int_equal(fixture->length, strlen(expected));
    assert_int_equal(fixture->taken, expected_taken);
}

/* --- whole lines --- */

static void nothing_has_no_line(void **state)
{
    assert_int_equal(next(*state), LINES_NONE);
    assert_int_equal(last(*state), LINES_NONE);
}

static void lines_come_whole_whatever_their_pieces(void **state)
{
    put(*state, "one\r\ntw");
    assert_line(*state, "one", 5);
    assert_int_equal(next(*state), LINES_NONE);
    put(*state, "o\n\nlast");
    assert_line(*state, "two", 4);
    assert_line(*state, "", 1);
    assert_int_equal(next(*state), LINES_NONE);
}

static void one_piece_may_hold_many_lines(void **state)
{
    put(*state, "fog\nbell\nlamp\n");
    assert_line(*state, "fog", 4);
    assert_line(*state, "bell", 5);
    assert_line(*state, "lamp", 5);
    assert_int_equal(next(*state), LINES_NONE);
}

static void a_line_may_come_byte_by_byte(void **state)
{
    static const char TEXT[] = "fog bell\r\n";
    for (size_t i = 0; i + 1 < sizeof TEXT; i++) {
        assert_int_equal(next(*state), LINES_NONE);
        put_bytes(*state, &TEXT[i], 1);
    }
    assert_line(*state, "fog bell", 10);
}

static void only_the_last_carriage_return_is_dropped(void **state)
{
    put(*state, "a\rb\r\r\n\r\n");
    assert_line(*state, "a\rb\r", 6);
    assert_line(*state, "", 2);
}

static void a_line_may_hold_nul(void **state)
{
    struct fixture *fixture = *state;
    put_bytes(fixture, "a\0b\n", 4);
    assert_int_equal(next(fixture), LINES_LINE);
    assert_int_equal(fixture->length, 3);
    assert_memory_equal(fixture->line, "a\0b", 4);
}

static void the_end_of_the_input_ends_a_last_line(void **state)
{
    struct fixture *fixture = *state;
    put(fixture, "one\nlast\r");
    assert_line(fixture, "one", 4);
    assert_int_equal(next(fixture), LINES_NONE);
    assert_int_equal(last(fixture), LINES_LINE);
    assert_string_equal(fixture->line, "last");
    assert_int_equal(fixture->length, 4);
    assert_int_equal(fixture->taken, 5);
    assert_int_equal(last(fixture), LINES_NONE);
}

/* --- the limit --- */

static void a_line_as_long_as_the_limit_is_taken(void **state)
{
    put(*state, "0123456789\n");
    assert_line(*state, "0123456789", 11);
}

static void one_byte_more_is_too_long_and_the_next_line_is_not(void **state)
{
    struct fixture *fixture = *state;
    put(fixture, "0123456789x\nfog\n");
    assert_int_equal(next(fixture), LINES_LONG);
    assert_int_equal(fixture->taken, 12);
    assert_line(fixture, "fog", 4);
}

/* It must not depend on the piece in which the line feed comes. */
static void a_carriage_return_counts_to_the_limit_in_any_pieces(void **state)
{
    put(*state, "0123456789\r\n");
    assert_int_equal(next(*state), LINES_LONG);
    put(*state, "0123456789\r");
    assert_int_equal(next(*state), LINES_NONE);
    put(*state, "\n");
    assert_int_equal(next(*state), LINES_LONG);
    put(*state, "012345678\r\n");
    assert_line(*state, "012345678", 11);
}

static void a_long_line_is_told_once_and_at_its_end(void **state)
{
    put(*state, "far too long ");
    assert_int_equal(next(*state), LINES_NONE);
    put(*state, "and longer");
    assert_int_equal(next(*state), LINES_NONE);
    put(*state, "\nfog\n");
    assert_int_equal(next(*state), LINES_LONG);
    assert_line(*state, "fog", 4);
    assert_int_equal(next(*state), LINES_NONE);
}

static void two_long_lines_are_told_twice(void **state)
{
    put(*state, "far too long line\nthe next is as long\nfog\n");
    assert_int_equal(next(*state), LINES_LONG);
    assert_int_equal(next(*state), LINES_LONG);
    assert_line(*state, "fog", 4);
}

static void a_line_over_the_limit_is_passed_over_without_being_held(void **state)
{
    struct fixture *fixture = *state;
    for (int i = 0; i < 10000; i++) {
        put(fixture, "far too long ");
        assert_int_equal(next(fixture), LINES_NONE);
    }
    assert_true(fixture->lines.capacity < 1000);
    put(fixture, "\nfog\n");
    assert_int_equal(next(fixture), LINES_LONG);
    assert_line(fixture, "fog", 4);
}

static void a_long_last_line_is_told_whether_or_not_it_was_seen_to_be_long(void **state)
{
    put(*state, "too long at once");
    assert_int_equal(last(*state), LINES_LONG);
    put(*state, "too long before");
    assert_int_equal(next(*state), LINES_NONE);
    assert_int_equal(last(*state), LINES_LONG);
    assert_int_equal(last(*state), LINES_NONE);
}

/* --- memory --- */

static void a_long_last_line_is_told_after_its_room_was_given_back(void **state)
{
    struct fixture *fixture = *state;
    put(fixture, "more than ten");
    assert_int_equal(next(fixture), LINES_NONE);
    lines_shrink(&fixture->lines, 0);
    assert_int_equal(last(fixture), LINES_LONG);
    assert_int_equal(last(fixture), LINES_NONE);
}

static void the_room_of_lines_that_were_taken_is_used_again(void **state)
{
    struct fixture *fixture = *state;
    for (int i = 0; i < 10000; i++) {
        put(fixture, "bell\nfo"); /* something always stays */
        assert_line(fixture, i == 0 ? "bell" : "fobell", i == 0 ? 5 : 7);
    }
    assert_true(fixture->lines.capacity < 1000);
}

static void room_that_no_machine_has_is_not_given(void **state)
{
    struct fixture *fixture = *state;
    put(fixture, "fog");
    assert_null(lines_room(&fixture->lines, SIZE_MAX));
    assert_null(lines_room(&fixture->lines, SIZE_MAX / 2 - 1));
    put(fixture, "\n");
    assert_line(fixture, "fog", 4); /* nothing was lost */
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(nothing_has_no_line),
        TEST(lines_come_whole_whatever_their_pieces),
        TEST(one_piece_may_hold_many_lines),
        TEST(a_line_may_come_byte_by_byte),
        TEST(only_the_last_carriage_return_is_dropped),
        TEST(a_line_may_hold_nul),
        TEST(the_end_of_the_input_ends_a_last_line),
        TEST(a_line_as_long_as_the_limit_is_taken),
        TEST(one_byte_more_is_too_long_and_the_next_line_is_not),
        TEST(a_carriage_return_counts_to_the_limit_in_any_pieces),
        TEST(a_long_line_is_told_once_and_at_its_end),
        TEST(two_long_lines_are_told_twice),
        TEST(a_line_over_the_limit_is_passed_over_without_being_held),
        TEST(a_long_last_line_is_told_whether_or_not_it_was_seen_to_be_long),
        TEST(a_long_last_line_is_told_after_its_room_was_given_back),
        TEST(the_room_of_lines_that_were_taken_is_used_again),
        TEST(room_that_no_machine_has_is_not_given),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
