/* The worklist's entries by the number of their item: put, found, taken out, in turn, stored. */
#include "daemon/learner/worklist.h"

#include <stdio.h>
#include <string.h>

#include "tests/unit/near.h"
#include "tests/unit/repeatable.h"

/* --- fixture ------------------------------------------------------------------------------------
 */

static int set_up(void **state)
{
    return worklist_new((struct worklist **)state);
}

static int tear_down(void **state)
{
    worklist_free(*state);
    return 0;
}

/* Scored when the model stood at `scored`; one gap, so that entries can be told apart. */
static struct worklist_entry entry_of(uint64_t number, uint64_t scored)
{
    return (struct worklist_entry){.number = number,
                                   .scored = scored,
                                   .gap_count = 1,
                                   .gaps = {{.tag = (uint32_t)(number % 1000U), .score = -0.5F}}};
}

static void put(struct worklist *worklist, uint64_t number, uint64_t scored)
{
    struct worklist_entry entry = entry_of(number, scored);
    assert_int_equal(worklist_put(worklist, &entry), 0);
}

static void take_out(struct worklist *worklist, uint64_t number)
{
    assert_int_equal(worklist_remove(worklist, number), 0);
}

static void assert_holds(const struct worklist *worklist, uint64_t number, uint64_t scored)
{
    const struct worklist_entry *entry = worklist_find(worklist, number);
    assert_non_null(entry);
    assert_true(entry->number == number);
    assert_true(entry->scored == scored);
    assert_int_equal(entry->gap_count, 1);
    assert_int_equal(entry->gaps[0].tag, number % 1000U);
}

/* --- put and found ------------------------------------------------------------------------------
 */

static void a_new_worklist_is_empty(void **state)
{
    assert_int_equal(worklist_size(*state), 0);
    assert_null(worklist_find(*state, 0));
    assert_null(worklist_find(*state, 1));
    assert_int_equal(worklist_count_stale(*state, UINT64_MAX), 0);
    assert_null(worklist_next_stale(*state, UINT64_MAX));
}

static void what_is_put_in_is_found_by_its_number(void **state)
{
    put(*state, 7, 70);
    put(*state, UINT64_MAX, 71);
    assert_int_equal(worklist_size(*state), 2);
    assert_holds(*state, 7, 70);
    assert_holds(*state, UINT64_MAX, 71);
    assert_null(worklist_find(*state, 8));
}

static void an_entry_takes_the_place_of_the_one_with_its_number(void **state)
{
    put(*state, 7, 70);
    put(*state, 8, 70);
    put(*state, 7, 90);
    assert_int_equal(worklist_size(*state), 2);
    assert_holds(*state, 7, 90);
    assert_holds(*state, 8, 70);
}

/* Numbers in a row, and numbers of which only the high bits differ. */
static void thousands_of_entries_are_found(void **state)
{
    enum {
        EACH = 3000
    };
    uint64_t bytes = worklist_bytes(*state);
    for (uint64_t i = 1; i <= EACH; i++) {
        put(*state, i, i);
        put(*state, i << 32U, i + 1);
    }
    assert_int_equal(worklist_size(*state), 2 * EACH);
    for (uint64_t i = 1; i <= EACH; i++) {
        assert_holds(*state, i, i);
        assert_holds(*state, i << 32U, i + 1);
    }
    assert_true(worklist_bytes(*state) >= bytes + 2 * EACH * sizeof(struct worklist_entry));
}

static void every_entry_has_one_place(void **state)
{
    bool seen[101] = {false};
    for (uint64_t i = 1; i <= 100; i++) {
        put(*state, i, i);
    }
    for (size_t place = 0; place < 100; place++) {
        uint64_t number = worklist_at(*state, place)->number;
        assert_true(number >= 1 && number <= 100);
        assert_false(seen[number]);
        seen[number] = true;
    }
}

/* --- taken out ----------------------------------------------------------------------------------
 */

static void what_is_taken_out_leaves_its_place_to_the_last(void **state)
{
    for (uint64_t i = 1; i <= 4; i++) {
        put(*state, i, 10 * i);
    }
    take_out(*state, 2);
    assert_int_equal(worklist_size(*state), 3);
    assert_null(worklist_find(*state, 2));
    assert_true(worklist_at(*state, 1)->number == 4);
    assert_holds(*state, 1, 10);
    assert_holds(*state, 3, 30);
    assert_holds(*state, 4, 40);
}

static void the_last_one_leaves_nothing_behind(void **state)
{
    put(*state, 1, 10);
    put(*state, 2, 20);
    take_out(*state, 2);
    assert_holds(*state, 1, 10);
    take_out(*state, 1);
    assert_int_equal(worklist_size(*state), 0);
    assert_null(worklist_find(*state, 1));
    put(*state, 2, 21);
    assert_holds(*state, 2, 21);
}

static void what_is_not_there_is_taken_out_without_a_fuss(void **state)
{
    put(*state, 1, 10);
    take_out(*state, 99);
    assert_int_equal(worklist_size(*state), 1);
    assert_holds(*state, 1, 10);
}

/* Against a plain array by number, `scored` or 0 where there is none. */
static void comings_and_goings_leave_what_should_be_there(void **state)
{
    enum {
        NUMBERS = 600,
        CHANGES = 20000
    };
    static uint64_t plain[NUMBERS];
    struct repeatable random = {.state = 21};
    size_t size = 0;
    memset(plain, 0, sizeof plain);
    for (uint64_t change = 1; change <= CHANGES; change++) {
        uint32_t number = repeatable_below(&random, NUMBERS);
        if (repeatable_below(&random, 2)) {
            put(*state, number, change);
            size += plain[number] == 0;
            plain[number] = change;
        } else {
            take_out(*state, number);
            size -= plain[number] != 0;
            plain[number] = 0;
        }
    }
    assert_int_equal(worklist_size(*state), size);
    for (uint32_t number = 0; number < NUMBERS; number++) {
        if (plain[number] > 0) {
            assert_holds(*state, number, plain[number]);
        } else {
            assert_null(worklist_find(*state, number));
        }
    }
}

/* --- turns --------------------------------------------------------------------------------------
 */

/* Stale are the even ones. */
static void put_ten(struct worklist *worklist)
{
    for (uint64_t i = 1; i <= 10; i++) {
        put(worklist, i, i % 2 ? 50 : 40);
    }
}

static void every_stale_entry_gets_its_turn(void **state)
{
    size_t turns[11] = {0};
    put_ten(*state);
    for (int i = 0; i < 15; i++) {
        const struct worklist_entry *entry = worklist_next_stale(*state, 50);
        assert_non_null(entry);
        turns[entry->number]++;
    }
    for (size_t i = 1; i <= 10; i++) {
        assert_int_equal(turns[i], i % 2 ? 0 : 3);
    }
}

static void what_has_been_scored_again_is_stale_no_more(void **state)
{
    put_ten(*state);
    for (size_t left = 5; left > 0; left--) {
        assert_int_equal(worklist_count_stale(*state, 50), left);
        put(*state, worklist_next_stale(*state, 50)->number, 50);
    }
    assert_int_equal(worklist_count_stale(*state, 50), 0);
    assert_null(worklist_next_stale(*state, 50));
}

static void scores_as_old_as_the_limit_are_not_stale(void **state)
{
    put(*state, 1, 40);
    assert_null(worklist_next_stale(*state, 40));
    assert_int_equal(worklist_count_stale(*state, 40), 0);
    assert_non_null(worklist_next_stale(*state, 41));
    assert_int_equal(worklist_count_stale(*state, 41), 1);
}

/* The turn may stand where there is no entry any more. */
static void turns_go_on_when_entries_are_taken_out(void **state)
{
    put_ten(*state);
    while (worklist_next_stale(*state, 50)->number != 10) {
    }
    for (uint64_t i = 3; i <= 10; i++) {
        take_out(*state, i);
    }
    assert_true(worklist_next_stale(*state, 50)->number == 2);
    assert_true(worklist_next_stale(*state, 50)->number == 2);
}

/* --- for the store ------------------------------------------------------------------------------
 */

struct told {
    char put[64];
    char gone[64];
    int result; /* of the next call */
};

static int tell_put(void *user, const struct worklist_entry *entry)
{
    struct told *told = user;
    size_t used = strlen(told->put);
    (void)snprintf(told->put + used, sizeof told->put - used, "%llu@%llu ",
                   (unsigned long long)entry->number, (unsigned long long)entry->scored);
    return told->result;
}

static int tell_gone(void *user, uint64_t number)
{
    struct told *told = user;
    size_t used = strlen(told->gone);
    (void)snprintf(told->gone + used, sizeof told->gone - used, "%llu ",
                   (unsigned long long)number);
    return told->result;
}

static void assert_changes(const struct worklist *worklist, const char *put, const char *gone)
{
    struct told told = {.result = 0};
    assert_int_equal(worklist_changes(worklist, tell_put, tell_gone, &told), 0);
    assert_string_equal(told.put, put);
    assert_string_equal(told.gone, gone);
}

/* Of two stored entries, 1 and 2. */
static void put_two_and_store(struct worklist *worklist)
{
    put(worklist, 1, 10);
    put(worklist, 2, 20);
    worklist_clean(worklist);
}

static void what_is_new_is_told_until_it_is_stored(void **state)
{
    put(*state, 1, 10);
    put(*state, 2, 20);
    assert_changes(*state, "1@10 2@20 ", "");
    assert_changes(*state, "1@10 2@20 ", "");
    worklist_clean(*state);
    assert_changes(*state, "", "");
}

static void what_has_changed_alone_is_told_again(void **state)
{
    put_two_and_store(*state);
    put(*state, 2, 25);
    put(*state, 3, 30);
    assert_changes(*state, "2@25 3@30 ", "");
}

static void what_was_taken_out_is_told_once_by_its_number(void **state)
{
    put_two_and_store(*state);
    take_out(*state, 1);
    take_out(*state, 99);             /* which was never there */
    assert_changes(*state, "", "1 "); /* that 2 has moved is no change */
    worklist_clean(*state);
    assert_changes(*state, "", "");
}

static void a_change_goes_along_when_its_entry_moves(void **state)
{
    put_two_and_store(*state);
    put(*state, 2, 25);
    take_out(*state, 1);
    assert_changes(*state, "2@25 ", "1 ");
}

static void a_place_that_was_left_tells_nothing_of_who_was_there(void **state)
{
    put_two_and_store(*state);
    put(*state, 1, 15);
    take_out(*state, 1);
    assert_changes(*state, "", "1 ");
}

static void what_comes_back_is_not_told_as_gone(void **state)
{
    put_two_and_store(*state);
    take_out(*state, 1);
    put(*state, 1, 12);
    assert_changes(*state, "1@12 ", "");
}

static void whoever_stores_may_refuse(void **state)
{
    struct told told = {.result = 5};
    put_two_and_store(*state);
    put(*state, 1, 11);
    put(*state, 2, 21);
    assert_int_equal(worklist_changes(*state, tell_put, tell_gone, &told), 5);
    assert_string_equal(told.put, "1@11 ");
    take_out(*state, 1);
    told = (struct told){.result = 6};
    assert_int_equal(worklist_changes(*state, tell_put, tell_gone, &told), 6);
    assert_string_equal(told.put, "");
    assert_changes(*state, "2@21 ", "1 "); /* it is still to be stored */
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_new_worklist_is_empty),
        TEST(what_is_put_in_is_found_by_its_number),
        TEST(an_entry_takes_the_place_of_the_one_with_its_number),
        TEST(thousands_of_entries_are_found),
        TEST(every_entry_has_one_place),
        TEST(what_is_taken_out_leaves_its_place_to_the_last),
        TEST(the_last_one_leaves_nothing_behind),
        TEST(what_is_not_there_is_taken_out_without_a_fuss),
        TEST(comings_and_goings_leave_what_should_be_there),
        TEST(every_stale_entry_gets_its_turn),
        TEST(what_has_been_scored_again_is_stale_no_more),
        TEST(scores_as_old_as_the_limit_are_not_stale),
        TEST(turns_go_on_when_entries_are_taken_out),
        TEST(what_is_new_is_told_until_it_is_stored),
        TEST(what_has_changed_alone_is_told_again),
        TEST(what_was_taken_out_is_told_once_by_its_number),
        TEST(a_change_goes_along_when_its_entry_moves),
        TEST(a_place_that_was_left_tells_nothing_of_who_was_there),
        TEST(what_comes_back_is_not_told_as_gone),
        TEST(whoever_stores_may_refuse),
    };
    return cmocka_run_group_tests_name("worklist", tests, NULL, NULL);
}
