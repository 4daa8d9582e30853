/* All entries by number, changed and stored ones as if they lay together. */
#include "daemon/learner/worklist.h"

#include <stdio.h>

#include "tests/unit/worklist_fixture.h"

static void assert_walk(const struct listing *listing, const char *expected)
{
    char walked[256] = "";
    struct worklist_entry entry = {.number = 0};
    int result = 0;
    while ((result = next_after(listing, entry.number, &entry)) == 0) {
        size_t used = strlen(walked);
        (void)snprintf(walked + used, sizeof walked - used, "%llu@%llu ",
                       (unsigned long long)entry.number, (unsigned long long)entry.scored);
    }
    assert_int_equal(result, -ENOENT);
    assert_string_equal(walked, expected);
}

static void put_and_store(struct listing *listing, uint64_t first, uint64_t last)
{
    for (uint64_t i = first; i <= last; i++) {
        put(listing, i, 10 * i);
    }
    store(listing);
}

static void an_empty_worklist_has_no_entry_after_any(void **state)
{
    struct worklist_entry entry;
    assert_walk(*state, "");
    assert_int_equal(next_after(*state, UINT64_MAX, &entry), -ENOENT);
}

static void entries_follow_each_other_by_number(void **state)
{
    put(*state, 30, 1);
    put(*state, 10, 2);
    put(*state, 20, 3);
    assert_walk(*state, "10@2 20@3 30@1 ");
}

static void the_greatest_number_is_the_last(void **state)
{
    struct worklist_entry entry;
    put(*state, UINT64_MAX, 1);
    assert_int_equal(next_after(*state, UINT64_MAX - 1, &entry), 0);
    assert_true(entry.number == UINT64_MAX);
    assert_int_equal(next_after(*state, UINT64_MAX, &entry), -ENOENT);
}

static void a_walk_begins_behind_any_number(void **state)
{
    struct worklist_entry entry;
    put_and_store(*state, 5, 5);
    put(*state, 9, 90);
    assert_int_equal(next_after(*state, 4, &entry), 0);
    assert_is_entry(&entry, 5, 50);
    assert_int_equal(next_after(*state, 6, &entry), 0);
    assert_is_entry(&entry, 9, 90);
}

static void stored_entries_and_changes_come_in_one_order(void **state)
{
    put_and_store(*state, 2, 4);
    put(*state, 1, 1);
    put(*state, 3, 3);
    put(*state, 5, 5);
    assert_walk(*state, "1@1 2@20 3@3 4@40 5@5 ");
}

static void what_is_gone_is_passed_over(void **state)
{
    put_and_store(*state, 1, 6);
    take_out(*state, 1);
    take_out(*state, 3);
    take_out(*state, 4);
    take_out(*state, 6);
    assert_walk(*state, "2@20 5@50 ");
    take_out(*state, 2);
    take_out(*state, 5);
    assert_walk(*state, "");
}

static void changes_behind_the_last_stored_entry_are_walked(void **state)
{
    put_and_store(*state, 1, 2);
    take_out(*state, 2);
    put(*state, 3, 3);
    assert_walk(*state, "1@10 3@3 ");
}

static void a_walk_ends_where_the_base_cannot_be_read(void **state)
{
    struct listing *listing = *state;
    struct worklist_entry entry = entry_of(7, 70);
    put_and_store(listing, 1, 2);
    listing->stored.error = -EIO;
    assert_int_equal(next_after(listing, 1, &entry), -EIO);
    assert_is_entry(&entry, 7, 70);
}

/* The base is read by a search each time; that many must do for a walk. */
static void a_walk_reads_the_base_about_as_often_as_there_are_entries(void **state)
{
    enum {
        ENTRIES = 4000
    };
    struct listing *listing = *state;
    struct worklist_entry entry = {.number = 0};
    size_t walked = 0;
    put_and_store(listing, 1, ENTRIES);
    for (uint64_t i = 1; i <= ENTRIES; i++) {
        if (i % 4 == 0 || i > ENTRIES / 2) {
            take_out(listing, i);
        } else if (i % 4 == 1) {
            put(listing, i, 1);
        }
    }
    listing->stored.reads = 0;
    while (next_after(listing, entry.number, &entry) == 0) {
        walked++;
    }
    assert_int_equal(walked, ENTRIES / 2 / 4 * 3);
    assert_true(listing->stored.reads <= ENTRIES + 1);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(an_empty_worklist_has_no_entry_after_any),
        TEST(entries_follow_each_other_by_number),
        TEST(the_greatest_number_is_the_last),
        TEST(a_walk_begins_behind_any_number),
        TEST(stored_entries_and_changes_come_in_one_order),
        TEST(what_is_gone_is_passed_over),
        TEST(changes_behind_the_last_stored_entry_are_walked),
        TEST(a_walk_ends_where_the_base_cannot_be_read),
        TEST(a_walk_reads_the_base_about_as_often_as_there_are_entries),
    };
    return cmocka_run_group_tests_name("worklist_walk", tests, NULL, NULL);
}
