/* The worklist's entries by the number of their item: put, found, taken out, stored. */
#include "daemon/learner/worklist.h"

#include <stdio.h>

#include "tests/unit/worklist_fixture.h"

/* --- put and found ------------------------------------------------------------------------------
 */

static void a_new_worklist_is_empty(void **state)
{
    assert_size(*state, 0);
    assert_lacks(*state, 0);
    assert_lacks(*state, 1);
}

static void what_is_put_in_is_found_by_its_number(void **state)
{
    put(*state, 7, 70);
    put(*state, UINT64_MAX, 71);
    assert_size(*state, 2);
    assert_holds(*state, 7, 70);
    assert_holds(*state, UINT64_MAX, 71);
    assert_lacks(*state, 8);
}

static void an_entry_takes_the_place_of_the_one_with_its_number(void **state)
{
    put(*state, 7, 70);
    put(*state, 8, 70);
    put(*state, 7, 90);
    assert_size(*state, 2);
    assert_holds(*state, 7, 90);
    assert_holds(*state, 8, 70);
}

/* Numbers in a row, from the greatest down, and numbers of which only the high bits differ. */
static void thousands_of_entries_are_found(void **state)
{
    enum {
        EACH = 3000
    };
    for (uint64_t i = EACH; i >= 1; i--) {
        put(*state, i, i);
        put(*state, i << 32U, i + 1);
    }
    assert_size(*state, 2 * EACH);
    for (uint64_t i = 1; i <= EACH; i++) {
        assert_holds(*state, i, i);
        assert_holds(*state, i << 32U, i + 1);
    }
}

static void without_a_base_there_is_what_was_put_in(void **state)
{
    struct listing *listing = *state;
    struct worklist_entry entry = entry_of(1, 10);
    assert_int_equal(worklist_put(listing->worklist, NULL, &entry), 0);
    assert_int_equal(worklist_find(listing->worklist, NULL, 1, &entry), 0);
    assert_is_entry(&entry, 1, 10);
    assert_int_equal(worklist_find(listing->worklist, NULL, 2, &entry), -ENOENT);
    assert_int_equal(worklist_remove(listing->worklist, NULL, 2), 0);
    assert_int_equal(worklist_remove(listing->worklist, NULL, 1), 0);
    assert_size(listing, 0);
}

/* --- taken out ----------------------------------------------------------------------------------
 */

static void what_is_taken_out_leaves_the_others(void **state)
{
    for (uint64_t i = 1; i <= 4; i++) {
        put(*state, i, 10 * i);
    }
    take_out(*state, 2);
    assert_size(*state, 3);
    assert_lacks(*state, 2);
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
    assert_size(*state, 0);
    assert_lacks(*state, 1);
    put(*state, 2, 21);
    assert_holds(*state, 2, 21);
}

static void what_is_not_there_is_taken_out_without_a_fuss(void **state)
{
    put(*state, 1, 10);
    take_out(*state, 99);
    assert_size(*state, 1);
    assert_holds(*state, 1, 10);
}

/* --- over a base --------------------------------------------------------------------------------
 */

/* Of two stored entries, 1 and 2. */
static void put_two_and_store(struct listing *listing)
{
    put(listing, 1, 10);
    put(listing, 2, 20);
    store(listing);
}

static void what_was_stored_is_read_from_the_base(void **state)
{
    struct listing *listing = *state;
    put_two_and_store(listing);
    assert_size(listing, 2);
    assert_holds(listing, 1, 10);
    listing->stored.entries[0].scored = 11;
    assert_holds(listing, 1, 11);
}

static void a_change_hides_what_was_stored(void **state)
{
    put_two_and_store(*state);
    put(*state, 1, 15);
    assert_size(*state, 2);
    assert_holds(*state, 1, 15);
    assert_holds(*state, 2, 20);
}

static void what_is_gone_hides_what_was_stored(void **state)
{
    put_two_and_store(*state);
    take_out(*state, 1);
    assert_size(*state, 1);
    assert_lacks(*state, 1);
    take_out(*state, 1);
    assert_size(*state, 1);
}

static void what_is_changed_and_then_gone_does_not_come_back(void **state)
{
    put_two_and_store(*state);
    put(*state, 1, 15);
    take_out(*state, 1);
    assert_size(*state, 1);
    assert_lacks(*state, 1);
    put(*state, 1, 16);
    assert_size(*state, 2);
    assert_holds(*state, 1, 16);
}

static void an_entry_that_cannot_be_read_changes_nothing(void **state)
{
    struct listing *listing = *state;
    const struct base *base = &listing->stored.base;
    struct worklist_entry entry = entry_of(1, 15);
    put_two_and_store(listing);
    listing->stored.error = -EIO;
    assert_int_equal(worklist_put(listing->worklist, base, &entry), -EIO);
    assert_int_equal(worklist_remove(listing->worklist, base, 2), -EIO);
    entry = entry_of(7, 70);
    assert_int_equal(find(listing, 1, &entry), -EIO);
    assert_is_entry(&entry, 7, 70);
    listing->stored.error = 0;
    assert_size(listing, 2);
    assert_holds(listing, 1, 10);
    assert_holds(listing, 2, 20);
}

static void a_stored_entry_that_cannot_be_is_refused(void **state)
{
    struct listing *listing = *state;
    struct worklist_entry entry;
    put_two_and_store(listing);
    listing->stored.entries[0].gap_count = WORKLIST_GAPS + 1;
    listing->stored.entries[1].pair_count = WORKLIST_GAPS + 1;
    assert_int_equal(find(listing, 1, &entry), -EIO);
    assert_int_equal(find(listing, 2, &entry), -EIO);
    assert_int_equal(next_after(listing, 0, &entry), -EIO);
}

/* Nobody has been counted with such scores: it is not the base that it was. */
static void an_entry_that_was_never_counted_is_not_replaced(void **state)
{
    struct listing *listing = *state;
    struct worklist_entry entry = entry_of(1, 15);
    put_two_and_store(listing);
    listing->stored.entries[0].scored = 12;
    assert_int_equal(worklist_put(listing->worklist, &listing->stored.base, &entry), -EIO);
    assert_int_equal(worklist_remove(listing->worklist, &listing->stored.base, 1), -EIO);
    assert_size(listing, 2);
}

static void what_is_stored_takes_no_memory(void **state)
{
    enum {
        ENTRIES = 5000
    };
    struct listing *listing = *state;
    uint64_t empty = worklist_bytes(listing->worklist);
    for (uint64_t i = 1; i <= ENTRIES; i++) {
        put(listing, i, i);
    }
    assert_true(worklist_bytes(listing->worklist) >=
                empty + ENTRIES * sizeof(struct worklist_entry));
    store(listing);
    assert_true(worklist_bytes(listing->worklist) == empty);
}

/* An item that comes and goes before anything is stored: 16 bytes a number would add up. */
static void what_comes_and_goes_takes_no_memory(void **state)
{
    struct listing *listing = *state;
    put(listing, 1, 1);
    uint64_t one = worklist_bytes(listing->worklist);
    for (uint64_t i = 2; i <= 5000; i++) {
        put(listing, i, i);
        take_out(listing, i);
    }
    assert_true(worklist_bytes(listing->worklist) == one);
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

static void assert_changes(const struct listing *listing, const char *put, const char *gone)
{
    struct told told = {.result = 0};
    assert_int_equal(worklist_changes(listing->worklist, tell_put, tell_gone, &told), 0);
    assert_string_equal(told.put, put);
    assert_string_equal(told.gone, gone);
}

static void what_is_new_is_told_until_it_is_stored(void **state)
{
    put(*state, 2, 20);
    put(*state, 1, 10);
    assert_changes(*state, "1@10 2@20 ", "");
    assert_changes(*state, "1@10 2@20 ", "");
    store(*state);
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
    take_out(*state, 99); /* which was never there */
    assert_changes(*state, "", "1 ");
    store(*state);
    assert_changes(*state, "", "");
}

static void what_was_changed_and_then_taken_out_is_told_as_gone(void **state)
{
    put_two_and_store(*state);
    put(*state, 1, 15);
    take_out(*state, 1);
    assert_changes(*state, "", "1 ");
}

static void what_was_never_stored_is_not_told_as_gone(void **state)
{
    put_two_and_store(*state);
    put(*state, 3, 30);
    put(*state, 4, 40);
    take_out(*state, 3);
    assert_changes(*state, "4@40 ", "");
}

static void of_many_that_come_and_go_nothing_is_told(void **state)
{
    for (uint64_t i = 1; i <= 1000; i++) {
        put(*state, i, i);
    }
    for (uint64_t i = 1; i <= 1000; i++) {
        take_out(*state, i);
    }
    assert_size(*state, 0);
    assert_changes(*state, "", "");
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
    struct listing *listing = *state;
    struct told told = {.result = 5};
    put_two_and_store(listing);
    put(listing, 1, 11);
    put(listing, 2, 21);
    assert_int_equal(worklist_changes(listing->worklist, tell_put, tell_gone, &told), 5);
    assert_string_equal(told.put, "1@11 ");
    take_out(listing, 1);
    told = (struct told){.result = 6};
    assert_int_equal(worklist_changes(listing->worklist, tell_put, tell_gone, &told), 6);
    assert_string_equal(told.put, "");
    assert_changes(listing, "2@21 ", "1 "); /* it is still to be stored */
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_new_worklist_is_empty),
        TEST(what_is_put_in_is_found_by_its_number),
        TEST(an_entry_takes_the_place_of_the_one_with_its_number),
        TEST(thousands_of_entries_are_found),
        TEST(without_a_base_there_is_what_was_put_in),
        TEST(what_is_taken_out_leaves_the_others),
        TEST(the_last_one_leaves_nothing_behind),
        TEST(what_is_not_there_is_taken_out_without_a_fuss),
        TEST(what_was_stored_is_read_from_the_base),
        TEST(a_change_hides_what_was_stored),
        TEST(what_is_gone_hides_what_was_stored),
        TEST(what_is_changed_and_then_gone_does_not_come_back),
        TEST(an_entry_that_cannot_be_read_changes_nothing),
        TEST(a_stored_entry_that_cannot_be_is_refused),
        TEST(an_entry_that_was_never_counted_is_not_replaced),
        TEST(what_is_stored_takes_no_memory),
        TEST(what_comes_and_goes_takes_no_memory),
        TEST(what_is_new_is_told_until_it_is_stored),
        TEST(what_has_changed_alone_is_told_again),
        TEST(what_was_taken_out_is_told_once_by_its_number),
        TEST(what_was_changed_and_then_taken_out_is_told_as_gone),
        TEST(what_was_never_stored_is_not_told_as_gone),
        TEST(of_many_that_come_and_go_nothing_is_told),
        TEST(what_comes_back_is_not_told_as_gone),
        TEST(whoever_stores_may_refuse),
    };
    return cmocka_run_group_tests_name("worklist", tests, NULL, NULL);
}
