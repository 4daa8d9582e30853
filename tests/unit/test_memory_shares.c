/* How the memory budget is divided. */
#include "daemon/memory_shares.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

static const uint64_t MIB = 1U << 20U;

/* Of 64 MiB a third waits to be stored and 20 are the program's; a quarter of what is left is for
 * words. */
static void the_smallest_budget_leaves_a_share_for_each(void **state)
{
    (void)state;
    struct memory_shares shares = memory_shares_of(64 * MIB, 0);
    uint64_t left = 64 * MIB - 64 * MIB / 3 - 20 * MIB;
    assert_int_equal(shares.changed, 64 * MIB / 3);
    assert_int_equal(shares.dictionary, left / 4);
    assert_int_equal(shares.weights, left - left / 4);
}

/* Of 1200 MiB 400 wait to be stored, 20 are the program's and 60 are taken: 720 are left. */
static void what_others_take_is_not_shared_out(void **state)
{
    (void)state;
    struct memory_shares shares = memory_shares_of(1200 * MIB, 60 * MIB);
    assert_int_equal(shares.changed, 400 * MIB);
    assert_int_equal(shares.dictionary, 180 * MIB);
    assert_int_equal(shares.weights, 540 * MIB);
}

/* 64 - 21 - 20 - 15 would be 8, which is an eighth of the budget: the least that is left. */
static void the_caches_keep_an_eighth_of_the_budget(void **state)
{
    (void)state;
    const uint64_t taken[] = {15 * MIB, 21 * MIB, 500 * MIB, UINT64_MAX / 2};
    for (size_t i = 0; i < sizeof taken / sizeof taken[0]; i++) {
        struct memory_shares shares = memory_shares_of(64 * MIB, taken[i]);
        assert_int_equal(shares.changed, 64 * MIB / 3);
        assert_int_equal(shares.dictionary, 2 * MIB);
        assert_int_equal(shares.weights, 6 * MIB);
    }
}

static void the_shares_never_come_to_more_than_the_budget(void **state)
{
    (void)state;
    for (uint64_t budget = 64; budget <= 4096; budget += 7) {
        struct memory_shares shares = memory_shares_of(budget * MIB, 3 * MIB);
        assert_true(shares.changed + shares.dictionary + shares.weights <= budget * MIB);
        assert_true(shares.dictionary > 0 && shares.weights > shares.dictionary);
    }
}

/* 20 MiB are the program's, and a third and an eighth of the budget are for storing and the caches.
 */
static void the_least_budget_has_room_for_what_is_taken(void **state)
{
    (void)state;
    assert_int_equal(memory_shares_least_budget(110 * MIB), 240 * MIB);
    for (uint64_t taken = 1; taken < 4096; taken += 31) {
        uint64_t least = memory_shares_least_budget(taken * MIB);
        struct memory_shares shares = memory_shares_of(least, taken * MIB);
        assert_true(shares.changed + shares.dictionary + shares.weights + (20 + taken) * MIB <=
                    least + 64);
        assert_true(shares.dictionary + shares.weights >= least / 8);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_smallest_budget_leaves_a_share_for_each),
        cmocka_unit_test(what_others_take_is_not_shared_out),
        cmocka_unit_test(the_caches_keep_an_eighth_of_the_budget),
        cmocka_unit_test(the_shares_never_come_to_more_than_the_budget),
        cmocka_unit_test(the_least_budget_has_room_for_what_is_taken),
    };
    return cmocka_run_group_tests_name("memory shares", tests, NULL, NULL);
}
