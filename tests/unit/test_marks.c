#include "daemon/learner/marks.h"

#include <string.h>

#include "tests/unit/near.h"

static int set_up(void **state)
{
    static struct marks marks;
    memset(&marks, 0, sizeof marks);
    *state = &marks;
    return 0;
}

static int tear_down(void **state)
{
    marks_deinit(*state);
    return 0;
}

static void a_new_set_is_empty(void **state)
{
    const struct marks *marks = *state;
    assert_int_equal(marks->count, 0);
    assert_int_equal(marks_bytes(marks), 0);
}

static void numbers_are_walked_in_the_order_in_which_they_came(void **state)
{
    struct marks *marks = *state;
    assert_int_equal(marks_add(marks, 5), 0);
    assert_int_equal(marks_add(marks, 0), 0);
    assert_int_equal(marks_add(marks, 70000), 0);
    assert_int_equal(marks->count, 3);
    assert_int_equal(marks->list[0], 5);
    assert_int_equal(marks->list[1], 0);
    assert_int_equal(marks->list[2], 70000);
}

static void a_number_added_twice_is_there_once(void **state)
{
    struct marks *marks = *state;
    assert_int_equal(marks_add(marks, 5), 0);
    assert_int_equal(marks_add(marks, 6), 0);
    assert_int_equal(marks_add(marks, 5), 0);
    assert_int_equal(marks->count, 2);
}

static void an_emptied_set_takes_the_same_numbers_anew(void **state)
{
    struct marks *marks = *state;
    assert_int_equal(marks_add(marks, 5), 0);
    assert_int_equal(marks_add(marks, 6), 0);
    marks_clear(marks);
    assert_int_equal(marks->count, 0);
    assert_int_equal(marks_add(marks, 6), 0);
    assert_int_equal(marks->count, 1);
    assert_int_equal(marks->list[0], 6);
}

static void an_emptied_set_keeps_its_memory(void **state)
{
    struct marks *marks = *state;
    assert_int_equal(marks_add(marks, 5000), 0);
    uint64_t bytes = marks_bytes(marks);
    assert_true(bytes > 5000);
    marks_clear(marks);
    assert_int_equal(marks_bytes(marks), bytes);
}

static void many_numbers_are_each_there_once(void **state)
{
    enum {
        MANY = 10000
    };
    struct marks *marks = *state;
    for (uint32_t i = 0; i < 2 * MANY; i++) {
        assert_int_equal(marks_add(marks, i * 7919 % MANY), 0); /* a prime: every number twice */
    }
    assert_int_equal(marks->count, MANY);
}

static void two_sets_joined_have_each_number_once(void **state)
{
    struct marks *marks = *state;
    struct marks other = {0};
    assert_int_equal(marks_add(marks, 5), 0);
    assert_int_equal(marks_add(marks, 6), 0);
    assert_int_equal(marks_add(&other, 6), 0);
    assert_int_equal(marks_add(&other, 7), 0);
    assert_int_equal(marks_join(marks, &other), 0);
    assert_int_equal(marks->count, 3);
    assert_int_equal(marks->list[2], 7);
    assert_true(marks_has(marks, 7));
    assert_false(marks_has(&other, 5));
    assert_false(marks_has(&other, UINT32_MAX));
    marks_deinit(&other);
}

static void a_set_put_away_is_empty_and_may_be_used_again(void **state)
{
    struct marks *marks = *state;
    assert_int_equal(marks_add(marks, 5), 0);
    marks_deinit(marks);
    assert_int_equal(marks->count, 0);
    assert_int_equal(marks_add(marks, 5), 0);
    assert_int_equal(marks->count, 1);
}

int main(void)
{
#define marks_test(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)
    const struct CMUnitTest tests[] = {
        marks_test(a_new_set_is_empty),
        marks_test(numbers_are_walked_in_the_order_in_which_they_came),
        marks_test(a_number_added_twice_is_there_once),
        marks_test(an_emptied_set_takes_the_same_numbers_anew),
        marks_test(an_emptied_set_keeps_its_memory),
        marks_test(many_numbers_are_each_there_once),
        marks_test(two_sets_joined_have_each_number_once),
        marks_test(a_set_put_away_is_empty_and_may_be_used_again),
    };
    return cmocka_run_group_tests_name("marks", tests, NULL, NULL);
}
