/* An array that grows by half when it is full, or by an eighth. */
#include "daemon/grow.h"

#include <errno.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>

#include <cmocka.h>

static void an_empty_array_gets_room_for_eight(void **state)
{
    (void)state;
    uint32_t *array = NULL;
    size_t capacity = 0;
    assert_int_equal(GROW(&array, &capacity, 1), 0);
    assert_int_equal(capacity, 8);
    free(array);
}

static void what_is_new_is_zero_and_what_was_there_stays(void **state)
{
    (void)state;
    uint32_t *array = NULL;
    size_t capacity = 0;
    assert_int_equal(GROW(&array, &capacity, 8), 0);
    for (uint32_t i = 0; i < 8; i++) {
        assert_int_equal(array[i], 0);
        array[i] = i + 1;
    }
    assert_int_equal(GROW(&array, &capacity, 9), 0);
    assert_int_equal(capacity, 12); /* 8 and half of it */
    for (uint32_t i = 0; i < 12; i++) {
        assert_int_equal(array[i], i < 8 ? i + 1 : 0);
    }
    free(array);
}

static void from_a_mebibyte_on_it_grows_by_an_eighth(void **state)
{
    (void)state;
    uint32_t *array = NULL;
    size_t capacity = 0;
    size_t mebibyte = (1U << 20U) / sizeof *array;
    assert_int_equal(GROW(&array, &capacity, mebibyte - 8), 0);
    assert_int_equal(GROW(&array, &capacity, mebibyte), 0);
    assert_int_equal(capacity, mebibyte - 8 + (mebibyte - 8) / 2);
    size_t before = capacity;
    assert_int_equal(GROW(&array, &capacity, before + 1), 0);
    assert_int_equal(capacity, before + before / 8);
    assert_int_equal(array[capacity - 1], 0);
    free(array);
}

static void a_great_need_is_met_at_once(void **state)
{
    (void)state;
    uint32_t *array = NULL;
    size_t capacity = 0;
    assert_int_equal(GROW(&array, &capacity, 1000), 0);
    assert_int_equal(capacity, 1000);
    assert_int_equal(array[999], 0);
    free(array);
}

static void where_there_is_room_nothing_happens(void **state)
{
    (void)state;
    uint32_t array[4] = {1, 2, 3, 4};
    uint32_t *same = array;
    size_t capacity = 4;
    assert_int_equal(GROW(&same, &capacity, 4), 0);
    assert_ptr_equal(same, array);
    assert_int_equal(capacity, 4);
}

static void more_than_can_be_addressed_is_refused_with_nothing_changed(void **state)
{
    (void)state;
    uint32_t *array = NULL;
    size_t capacity = 0;
    assert_int_equal(GROW(&array, &capacity, 3), 0);
    uint32_t *before = array;
    array[0] = 7;
    assert_int_equal(GROW(&array, &capacity, SIZE_MAX / sizeof *array + 1), -ENOMEM);
    assert_int_equal(GROW(&array, &capacity, SIZE_MAX), -ENOMEM);
    assert_ptr_equal(array, before);
    assert_int_equal(capacity, 8);
    assert_int_equal(array[0], 7);
    free(array);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(an_empty_array_gets_room_for_eight),
        cmocka_unit_test(what_is_new_is_zero_and_what_was_there_stays),
        cmocka_unit_test(from_a_mebibyte_on_it_grows_by_an_eighth),
        cmocka_unit_test(a_great_need_is_met_at_once),
        cmocka_unit_test(where_there_is_room_nothing_happens),
        cmocka_unit_test(more_than_can_be_addressed_is_refused_with_nothing_changed),
    };
    return cmocka_run_group_tests_name("grow", tests, NULL, NULL);
}
