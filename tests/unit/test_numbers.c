/* Sets of tag numbers: every pair of subsets of six numbers, against the bits of two words. */
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <string.h>

#include "storage/numbers.h"
#include "tests/unit/repeatable.h"

enum {
    MEMBERS = 6,
    SUBSETS = 1 << MEMBERS
};

/* Bit k of a subset stands for MEMBER[k]. */
static const uint32_t MEMBER[MEMBERS] = {0, 1, 5, 1000, UINT32_MAX - 1, UINT32_MAX};

static struct numbers set_of(unsigned bits, uint32_t room[MEMBERS])
{
    size_t count = 0;
    for (unsigned k = 0; k < MEMBERS; k++) {
        if (bits & (1U << k)) {
            room[count++] = MEMBER[k];
        }
    }
    return (struct numbers){.list = room, .count = count};
}

static void assert_set(struct numbers set, unsigned bits)
{
    uint32_t room[MEMBERS];
    struct numbers expected = set_of(bits, room);
    assert_int_equal(set.count, expected.count);
    assert_memory_equal(set.list, expected.list, expected.count * sizeof *expected.list);
}

/* Runs an operation on every pair of subsets, with no more room than its result may need. */
static void assert_on_all_pairs(struct numbers (*operation)(struct numbers, struct numbers,
                                                            uint32_t *),
                                unsigned (*expected)(unsigned, unsigned),
                                size_t (*most)(struct numbers, struct numbers))
{
    for (unsigned i = 0; i < SUBSETS; i++) {
        for (unsigned j = 0; j < SUBSETS; j++) {
            uint32_t rooms[2][MEMBERS];
            uint32_t into[2 * MEMBERS + 1];
            struct numbers left = set_of(i, rooms[0]);
            struct numbers right = set_of(j, rooms[1]);
            size_t end = most(left, right);
            memset(into, 0xA5, sizeof into);
            assert_set(operation(left, right, into), expected(i, j));
            assert_int_equal(into[end], 0xA5A5A5A5U); /* what lies behind is not written */
            assert_set(left, i);                      /* nor are the operands */
            assert_set(right, j);
        }
    }
}

static unsigned either(unsigned left, unsigned right)
{
    return left | right;
}

static unsigned left_alone(unsigned left, unsigned right)
{
    return left & ~right;
}

static unsigned both(unsigned left, unsigned right)
{
    return left & right;
}

static size_t sum_of_both(struct numbers left, struct numbers right)
{
    return left.count + right.count;
}

static size_t first(struct numbers left, struct numbers right)
{
    (void)right;
    return left.count;
}

static size_t smaller(struct numbers left, struct numbers right)
{
    return left.count < right.count ? left.count : right.count;
}

static void a_union_holds_what_is_in_either_once(void **state)
{
    (void)state;
    assert_on_all_pairs(numbers_unite, either, sum_of_both);
}

static void without_leaves_what_is_in_the_left_alone(void **state)
{
    (void)state;
    assert_on_all_pairs(numbers_without, left_alone, first);
}

static void common_is_what_is_in_both(void **state)
{
    (void)state;
    assert_on_all_pairs(numbers_common, both, smaller);
}

static void a_set_holds_its_members_and_nothing_else(void **state)
{
    (void)state;
    static const uint32_t OTHERS[] = {2, 4, 6, 999, 1001, 0x7FFFFFFF, UINT32_MAX - 2};
    for (unsigned bits = 0; bits < SUBSETS; bits++) {
        uint32_t room[MEMBERS];
        struct numbers set = set_of(bits, room);
        for (unsigned k = 0; k < MEMBERS; k++) {
            assert_int_equal(numbers_hold(set, MEMBER[k]), (bits >> k) & 1U);
        }
        for (size_t i = 0; i < sizeof OTHERS / sizeof OTHERS[0]; i++) {
            assert_false(numbers_hold(set, OTHERS[i]));
        }
    }
}

/* An item without tags has a list that points nowhere. */
static void a_set_without_a_list_is_empty(void **state)
{
    (void)state;
    const struct numbers none = {0};
    uint32_t seven = 7;
    uint32_t into[1] = {0};
    const struct numbers one = {.list = &seven, .count = 1};
    assert_false(numbers_hold(none, 0));
    assert_int_equal(numbers_unite(none, none, into).count, 0);
    assert_int_equal(numbers_without(none, one, into).count, 0);
    assert_int_equal(numbers_common(one, none, into).count, 0);
    assert_int_equal(numbers_unite(none, one, into).list[0], 7);
    assert_int_equal(numbers_sort_unique(NULL, 0), 0);
}

static void a_list_is_sorted_and_what_stands_twice_stands_once(void **state)
{
    (void)state;
    uint32_t list[] = {UINT32_MAX, 7, 0, 7, UINT32_MAX, 3, 0, 7};
    const uint32_t expected[] = {0, 3, 7, UINT32_MAX};
    assert_int_equal(numbers_sort_unique(list, sizeof list / sizeof list[0]), 4);
    assert_memory_equal(list, expected, sizeof expected);
}

/* Numbers below 32, so that the bits of a word say what a list holds. */
static void sorting_keeps_every_number_of_a_list(void **state)
{
    (void)state;
    struct repeatable random = {.state = 1911};
    for (int round = 0; round < 1000; round++) {
        uint32_t list[40];
        uint32_t held = 0;
        size_t count = repeatable_below(&random, 41);
        for (size_t i = 0; i < count; i++) {
            list[i] = repeatable_below(&random, 32);
            held |= 1U << list[i];
        }
        size_t kept = numbers_sort_unique(list, count);
        uint32_t found = 0;
        for (size_t i = 0; i < kept; i++) {
            assert_true(i == 0 || list[i - 1] < list[i]);
            found |= 1U << list[i];
        }
        assert_int_equal(found, held);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_union_holds_what_is_in_either_once),
        cmocka_unit_test(without_leaves_what_is_in_the_left_alone),
        cmocka_unit_test(common_is_what_is_in_both),
        cmocka_unit_test(a_set_holds_its_members_and_nothing_else),
        cmocka_unit_test(a_set_without_a_list_is_empty),
        cmocka_unit_test(a_list_is_sorted_and_what_stands_twice_stands_once),
        cmocka_unit_test(sorting_keeps_every_number_of_a_list),
    };
    return cmocka_run_group_tests_name("numbers", tests, NULL, NULL);
}
