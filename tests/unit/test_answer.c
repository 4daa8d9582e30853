/* Building an answer member by member: nothing is lost, and one failure makes the whole NULL. */
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>

#include "daemon/answer.h"

/* A value that the test keeps hold of, to see who else does. */
static json_t *shared_value(void)
{
    return json_pack("[s]", "fog");
}

static void assert_mine_alone(json_t *value)
{
    assert_int_equal(value->refcount, 1);
    json_decref(value);
}

static void members_are_added_and_taken(void **state)
{
    (void)state;
    json_t *object = json_object();
    json_t *value = shared_value();
    answer_add(&object, "tags", json_incref(value));
    answer_add(&object, "count", answer_count(3));
    assert_int_equal(json_object_size(object), 2);
    assert_ptr_equal(json_object_get(object, "tags"), value);
    assert_int_equal(json_integer_value(json_object_get(object, "count")), 3);
    assert_int_equal(value->refcount, 2);
    json_decref(object);
    assert_mine_alone(value);
}

static void entries_are_appended_in_order_and_taken(void **state)
{
    (void)state;
    json_t *array = json_array();
    json_t *value = shared_value();
    answer_append(&array, answer_count(1));
    answer_append(&array, json_incref(value));
    assert_int_equal(json_array_size(array), 2);
    assert_int_equal(json_integer_value(json_array_get(array, 0)), 1);
    assert_ptr_equal(json_array_get(array, 1), value);
    json_decref(array);
    assert_mine_alone(value);
}

static void a_member_that_there_was_no_memory_for_makes_the_whole_null(void **state)
{
    (void)state;
    json_t *object = json_object();
    json_t *value = shared_value();
    answer_add(&object, "tags", json_incref(value));
    answer_add(&object, "count", NULL);
    assert_null(object);
    assert_mine_alone(value); /* the object was freed with what it had */
}

static void an_entry_that_there_was_no_memory_for_makes_the_whole_null(void **state)
{
    (void)state;
    json_t *array = json_array();
    json_t *value = shared_value();
    answer_append(&array, json_incref(value));
    answer_append(&array, NULL);
    assert_null(array);
    assert_mine_alone(value);
}

static void what_comes_after_a_failure_is_taken_and_freed(void **state)
{
    (void)state;
    json_t *nothing = NULL;
    json_t *value = shared_value();
    answer_add(&nothing, "tags", json_incref(value));
    assert_null(nothing);
    answer_append(&nothing, json_incref(value));
    assert_null(nothing);
    answer_add(&nothing, "count", NULL);
    answer_append(&nothing, NULL);
    assert_null(nothing);
    assert_mine_alone(value);
}

/* An inner object that failed makes the outer one fail, too. */
static void a_failure_goes_up_to_the_outermost(void **state)
{
    (void)state;
    json_t *inner = json_object();
    json_t *outer = json_object();
    answer_add(&inner, "count", NULL);
    answer_add(&outer, "bands", inner);
    assert_null(outer);
}

static void a_number_is_a_number_and_null_where_it_is_none(void **state)
{
    (void)state;
    static const double NUMBERS[] = {0.0, -1.5, 0.1, 1e300};
    for (size_t i = 0; i < sizeof NUMBERS / sizeof NUMBERS[0]; i++) {
        json_t *number = answer_number(NUMBERS[i]);
        assert_true(json_is_real(number));
        assert_true(json_real_value(number) == NUMBERS[i]);
        json_decref(number);
    }
    assert_true(json_is_null(answer_number((double)NAN)));
    assert_true(json_is_null(answer_number((double)INFINITY)));
    assert_true(json_is_null(answer_number(-(double)INFINITY)));
}

static void a_count_is_a_whole_number(void **state)
{
    (void)state;
    static const uint64_t COUNTS[] = {0, 1, UINT32_MAX, INT64_MAX};
    for (size_t i = 0; i < sizeof COUNTS / sizeof COUNTS[0]; i++) {
        json_t *count = answer_count(COUNTS[i]);
        assert_true(json_is_integer(count));
        assert_true(json_integer_value(count) == (json_int_t)COUNTS[i]);
        json_decref(count);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(members_are_added_and_taken),
        cmocka_unit_test(entries_are_appended_in_order_and_taken),
        cmocka_unit_test(a_member_that_there_was_no_memory_for_makes_the_whole_null),
        cmocka_unit_test(an_entry_that_there_was_no_memory_for_makes_the_whole_null),
        cmocka_unit_test(what_comes_after_a_failure_is_taken_and_freed),
        cmocka_unit_test(a_failure_goes_up_to_the_outermost),
        cmocka_unit_test(a_number_is_a_number_and_null_where_it_is_none),
        cmocka_unit_test(a_count_is_a_whole_number),
    };
    return cmocka_run_group_tests_name("answer", tests, NULL, NULL);
}
