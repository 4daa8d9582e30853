/* How many lines of a kind are logged, with a clock that the test turns. */
#include "daemon/log_limit.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

/* Asks as often as that; says how often it was allowed. */
static unsigned ask(struct log_limit *limit, unsigned times, uint64_t now_ms)
{
    unsigned allowed = 0;
    for (unsigned i = 0; i < times; i++) {
        allowed += log_limit_allows(limit, now_ms);
    }
    return allowed;
}

static void a_few_lines_in_a_span_are_logged(void **state)
{
    (void)state;
    struct log_limit limit = {0};
    assert_int_equal(ask(&limit, 1000, 50), LOG_LIMIT_LINES);
    assert_int_equal(ask(&limit, 1000, 50 + LOG_LIMIT_SPAN_MS - 1), 0);
}

static void the_next_span_has_as_many(void **state)
{
    (void)state;
    struct log_limit limit = {0};
    (void)ask(&limit, 1000, 50);
    assert_int_equal(ask(&limit, 1000, 50 + LOG_LIMIT_SPAN_MS), LOG_LIMIT_LINES);
    assert_int_equal(ask(&limit, 1000, 50 + 2 * LOG_LIMIT_SPAN_MS), LOG_LIMIT_LINES);
}

static void what_was_held_back_is_told_once_when_the_span_is_over(void **state)
{
    (void)state;
    struct log_limit limit = {0};
    (void)ask(&limit, LOG_LIMIT_LINES + 37, 50);
    assert_int_equal(log_limit_held_back(&limit, 51), 0);
    assert_int_equal(log_limit_held_back(&limit, 50 + LOG_LIMIT_SPAN_MS), 37);
    assert_int_equal(log_limit_held_back(&limit, 50 + LOG_LIMIT_SPAN_MS), 0);
}

static void where_nothing_was_held_back_there_is_nothing_to_tell(void **state)
{
    (void)state;
    struct log_limit limit = {0};
    assert_int_equal(log_limit_held_back(&limit, 0), 0);
    (void)ask(&limit, LOG_LIMIT_LINES, 50);
    assert_int_equal(log_limit_held_back(&limit, 50 + LOG_LIMIT_SPAN_MS), 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_few_lines_in_a_span_are_logged),
        cmocka_unit_test(the_next_span_has_as_many),
        cmocka_unit_test(what_was_held_back_is_told_once_when_the_span_is_over),
        cmocka_unit_test(where_nothing_was_held_back_there_is_nothing_to_tell),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
