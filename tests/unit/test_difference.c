/* What makes one list of numbers into another. Numbers are little-endian, four bytes each. */
#include "storage/difference.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

enum {
    MOST = 600,      /* numbers of a list here */
    ROOM = 4 * MOST, /* bytes */
    TRIALS = 2000
};

#define LIST(...)                                                                                  \
    kv_bytes_of((const uint32_t[]){__VA_ARGS__}, sizeof((const uint32_t[]){__VA_ARGS__}))
#define BYTES(...)                                                                                 \
    kv_bytes_of((const unsigned char[]){__VA_ARGS__}, sizeof((const unsigned char[]){__VA_ARGS__}))
static const struct kv_bytes NO_NUMBERS = {.data = "", .size = 0};

static void assert_is(struct kv_bytes before, struct kv_bytes after, struct kv_bytes expected)
{
    unsigned char made[ROOM];
    size_t size = 0;
    assert_true(difference_make(before, after, made, sizeof made, &size));
    assert_int_equal(size, expected.size);
    assert_memory_equal(made, expected.data, size);
}

static void assert_goes_there_and_back(struct kv_bytes before, struct kv_bytes after)
{
    unsigned char made[2 * ROOM];
    unsigned char again[ROOM];
    size_t made_size = 0;
    size_t size = 0;
    assert_true(difference_make(before, after, made, sizeof made, &made_size));
    assert_true(difference_apply(before, kv_bytes_of(made, made_size), again, sizeof again, &size));
    assert_int_equal(size, after.size);
    assert_memory_equal(again, after.data, size);
}

/* --- what it looks like --- */

static void lists_that_are_alike_take_the_length_alone(void **state)
{
    (void)state;
    assert_is(LIST(7, 8, 9), LIST(7, 8, 9), BYTES(3, 0));
    assert_is(NO_NUMBERS, NO_NUMBERS, BYTES(0, 0));
}

/* Three numbers; two as they were, one that is not: 5. */
static void a_number_that_has_changed_stands_behind_how_many_have_not(void **state)
{
    (void)state;
    assert_is(LIST(7, 8, 9), LIST(7, 8, 5), BYTES(3, 0, 2, 1, 5, 0, 0, 0));
}

static void neighbours_that_have_changed_share_a_run(void **state)
{
    (void)state;
    assert_is(LIST(7, 8, 9), LIST(1, 2, 9), BYTES(3, 0, 0, 2, 1, 0, 0, 0, 2, 0, 0, 0));
}

static void what_a_list_has_more_has_changed(void **state)
{
    (void)state;
    assert_is(LIST(7), LIST(7, 0), BYTES(2, 0, 1, 1, 0, 0, 0, 0));
}

static void a_list_that_has_lost_its_end_takes_the_length_alone(void **state)
{
    (void)state;
    assert_is(LIST(7, 8, 9), LIST(7), BYTES(1, 0));
}

/* A run has at most 255 numbers of each kind: of 300 alike ones before one that is not, 255 are in
 * a run of their own, with none that has changed. */
static void a_long_way_to_the_next_change_takes_more_runs(void **state)
{
    uint32_t before[301] = {0};
    uint32_t after[301] = {0};
    (void)state;
    after[300] = 6;
    assert_is(kv_bytes_of(before, sizeof before), kv_bytes_of(after, sizeof after),
              BYTES(301 & 255, 1, 255, 0, 45, 1, 6, 0, 0, 0));
}

/* --- there and back --- */

static size_t fill(unsigned short seed[3], uint32_t *numbers, uint32_t kinds)
{
    size_t count = (size_t)nrand48(seed) % (MOST + 1);
    for (size_t i = 0; i < count; i++) {
        numbers[i] = (uint32_t)nrand48(seed) % kinds;
    }
    return count * sizeof *numbers;
}

/* Of few kinds of numbers, so that many are alike; of one kind, so that runs are long. */
static void any_list_is_made_of_any_other(void **state)
{
    unsigned short seed[3] = {1, 9, 1};
    uint32_t before[MOST];
    uint32_t after[MOST];
    (void)state;
    for (int i = 0; i < TRIALS; i++) {
        uint32_t kinds = 1 + (uint32_t)i % 3;
        size_t before_size = fill(seed, before, kinds);
        size_t after_size = fill(seed, after, kinds);
        assert_goes_there_and_back(kv_bytes_of(before, before_size),
                                   kv_bytes_of(after, after_size));
    }
}

/* --- what is refused --- */

static void one_that_takes_too_much_is_not_made(void **state)
{
    unsigned char made[8];
    size_t size = 77;
    (void)state;
    assert_true(difference_make(LIST(7), LIST(5), made, 8, &size));
    assert_int_equal(size, 8);
    size = 77;
    assert_false(difference_make(LIST(7), LIST(5), made, 7, &size));
    assert_false(difference_make(LIST(7), LIST(7), made, 1, &size));
    assert_int_equal(size, 77);
}

static void bytes_that_are_no_numbers_have_no_difference(void **state)
{
    unsigned char made[ROOM];
    size_t size = 0;
    (void)state;
    assert_false(difference_make(BYTES(1, 2, 3), LIST(7), made, sizeof made, &size));
    assert_false(difference_make(LIST(7), BYTES(1, 2, 3, 4, 5), made, sizeof made, &size));
}

static void assert_does_not_fit(struct kv_bytes before, struct kv_bytes difference, size_t most)
{
    unsigned char again[ROOM];
    size_t size = 77;
    assert_false(difference_apply(before, difference, again, most, &size));
    assert_int_equal(size, 77);
}

static void what_does_not_fit_the_list_before_is_refused(void **state)
{
    (void)state;
    assert_does_not_fit(LIST(7), ((struct kv_bytes){.data = "", .size = 0}), ROOM);
    assert_does_not_fit(LIST(7), BYTES(1), ROOM);
    assert_does_not_fit(LIST(7), BYTES(2, 0), ROOM);                   /* the second is nowhere */
    assert_does_not_fit(LIST(7), BYTES(3, 0, 2, 1, 5, 0, 0, 0), ROOM); /* likewise */
    assert_does_not_fit(LIST(7), BYTES(1, 0, 0), ROOM);                /* half a run */
    assert_does_not_fit(LIST(7), BYTES(1, 0, 0, 1, 5, 0, 0), ROOM);    /* half a number */
    assert_does_not_fit(LIST(7), BYTES(1, 0, 1, 1, 5, 0, 0, 0), ROOM); /* behind the end */
    assert_does_not_fit(LIST(7, 8), BYTES(2, 0, 255, 0), ROOM);        /* likewise */
    assert_does_not_fit(BYTES(1, 2, 3), BYTES(0, 0), ROOM);
    assert_does_not_fit(LIST(7, 8), BYTES(2, 0), 7); /* no room */
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(lists_that_are_alike_take_the_length_alone),
        cmocka_unit_test(a_number_that_has_changed_stands_behind_how_many_have_not),
        cmocka_unit_test(neighbours_that_have_changed_share_a_run),
        cmocka_unit_test(what_a_list_has_more_has_changed),
        cmocka_unit_test(a_list_that_has_lost_its_end_takes_the_length_alone),
        cmocka_unit_test(a_long_way_to_the_next_change_takes_more_runs),
        cmocka_unit_test(any_list_is_made_of_any_other),
        cmocka_unit_test(one_that_takes_too_much_is_not_made),
        cmocka_unit_test(bytes_that_are_no_numbers_have_no_difference),
        cmocka_unit_test(what_does_not_fit_the_list_before_is_refused),
    };
    return cmocka_run_group_tests_name("difference", tests, NULL, NULL);
}
