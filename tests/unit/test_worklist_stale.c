/* Entries with stale scores: how many, and which one is next. */
#include "daemon/learner/worklist.h"

#include "tests/unit/worklist_fixture.h"

/* As many numbers have a bucket of their own; see worklist_totals.h. */
enum {
    BUCKETS = 4096
};

static void assert_next(struct listing *listing, uint64_t scored, uint64_t number)
{
    struct worklist_entry entry;
    assert_int_equal(next_stale(listing, scored, &entry), 0);
    assert_true(entry.number == number);
}

static void assert_none(struct listing *listing, uint64_t scored)
{
    struct worklist_entry entry;
    assert_int_equal(next_stale(listing, scored, &entry), -ENOENT);
    assert_stale(listing, scored, 0);
}

/* Stale are the even ones. */
static void put_ten(struct listing *listing)
{
    for (uint64_t i = 1; i <= 10; i++) {
        put(listing, i, i % 2 ? 50 : 40);
    }
}

/* --- turns --------------------------------------------------------------------------------------
 */

static void a_new_worklist_has_nothing_stale(void **state)
{
    assert_none(*state, UINT64_MAX);
}

static void stale_entries_take_turns_by_number(void **state)
{
    put_ten(*state);
    for (int round = 0; round < 3; round++) {
        for (uint64_t i = 2; i <= 10; i += 2) {
            assert_next(*state, 50, i);
        }
    }
}

static void the_turn_goes_on_over_what_was_stored(void **state)
{
    put_ten(*state);
    assert_next(*state, 50, 2);
    assert_next(*state, 50, 4);
    store(*state);
    assert_next(*state, 50, 6);
}

static void what_has_been_scored_again_is_stale_no_more(void **state)
{
    struct worklist_entry entry;
    put_ten(*state);
    store(*state);
    for (size_t left = 5; left > 0; left--) {
        assert_stale(*state, 50, left);
        assert_int_equal(next_stale(*state, 50, &entry), 0);
        put(*state, entry.number, 50);
    }
    assert_none(*state, 50);
}

static void scores_as_old_as_the_limit_are_not_stale(void **state)
{
    put(*state, 1, 40);
    assert_none(*state, 40);
    assert_next(*state, 41, 1);
    assert_stale(*state, 41, 1);
}

/* The turn may stand where there is no entry any more. */
static void turns_go_on_when_entries_are_taken_out(void **state)
{
    put_ten(*state);
    for (uint64_t i = 2; i <= 10; i += 2) {
        assert_next(*state, 50, i);
    }
    for (uint64_t i = 3; i <= 10; i++) {
        take_out(*state, i);
    }
    assert_next(*state, 50, 2);
    assert_next(*state, 50, 2);
}

static void nothing_is_read_when_nothing_is_stale(void **state)
{
    struct listing *listing = *state;
    put_ten(listing);
    store(listing);
    listing->stored.reads = 0;
    assert_none(listing, 40);
    assert_int_equal(listing->stored.reads, 0);
}

/* 1,000 turns, of which each begins where the last one ended: all entries are read once. */
static void a_round_reads_each_entry_about_once(void **state)
{
    enum {
        ENTRIES = 2000
    };
    struct listing *listing = *state;
    for (uint64_t i = 1; i <= ENTRIES; i++) {
        put(listing, i, i % 2 ? 50 : 40);
    }
    store(listing);
    listing->stored.reads = 0;
    for (uint64_t i = 2; i <= ENTRIES; i += 2) {
        assert_next(listing, 50, i);
    }
    assert_true(listing->stored.reads <= ENTRIES + 1);
}

static void a_turn_that_cannot_be_read_is_not_lost(void **state)
{
    struct listing *listing = *state;
    struct worklist_entry entry = entry_of(7, 70);
    put_ten(listing);
    store(listing);
    assert_next(listing, 50, 2);
    listing->stored.error = -EIO;
    assert_int_equal(next_stale(listing, 50, &entry), -EIO);
    assert_is_entry(&entry, 7, 70);
    listing->stored.error = 0;
    assert_next(listing, 50, 4);
}

/* One was counted, and the base has lost it. */
static void what_was_counted_and_is_not_there_is_damage(void **state)
{
    struct listing *listing = *state;
    struct worklist_entry entry;
    put(listing, 1, 40);
    store(listing);
    listing->stored.count = 0;
    assert_int_equal(next_stale(listing, 50, &entry), -EIO);
}

/* --- counts -------------------------------------------------------------------------------------
 */

static void counts_follow_what_is_put_and_taken_out(void **state)
{
    put(*state, 1, 10);
    put(*state, 2, 10);
    put(*state, 3, 20);
    store(*state);
    assert_stale(*state, 11, 2);
    assert_stale(*state, 21, 3);
    put(*state, 1, 15);
    assert_stale(*state, 11, 1);
    assert_stale(*state, 16, 2);
    take_out(*state, 2);
    assert_stale(*state, 16, 1);
    take_out(*state, 2);
    take_out(*state, 77);
    assert_stale(*state, UINT64_MAX, 2);
}

static void counts_are_exact_while_each_number_has_its_bucket(void **state)
{
    for (uint64_t i = 1; i < BUCKETS; i++) {
        put(*state, i, i);
    }
    for (uint64_t scored = 1; scored <= BUCKETS; scored++) {
        assert_stale(*state, scored, scored - 1);
    }
}

/* 4096 is in bucket 2048 of width 2, and what is asked for is rounded down to an even number. */
static void buckets_are_twice_as_wide_when_a_number_lies_beyond(void **state)
{
    put(*state, 1, 100);
    put(*state, 2, 101);
    put(*state, 3, 102);
    assert_stale(*state, 101, 1);
    put(*state, 4, BUCKETS);
    assert_stale(*state, 101, 0);
    assert_stale(*state, 102, 2);
    assert_stale(*state, 103, 2);
    assert_stale(*state, BUCKETS + 1, 3);
    assert_stale(*state, BUCKETS + 2, 4);
}

/* Of 100 and 101 in one bucket the first is stale below 101, but not counted. */
static void what_is_not_counted_has_no_turn(void **state)
{
    put(*state, 1, 100);
    put(*state, 2, 101);
    put(*state, 3, 98);
    put(*state, 4, BUCKETS);
    for (int i = 0; i < 3; i++) {
        assert_next(*state, 101, 3);
    }
    assert_next(*state, 102, 1);
    take_out(*state, 3);
    assert_none(*state, 101);
}

static void the_width_stays_when_the_great_number_leaves(void **state)
{
    put(*state, 1, 100);
    put(*state, 2, BUCKETS);
    take_out(*state, 2);
    assert_stale(*state, 101, 0);
    assert_stale(*state, 102, 1);
}

/* 2^64 - 1 makes buckets as wide as 2^52. */
static void any_number_has_a_bucket(void **state)
{
    put(*state, 1, 1);
    put(*state, 2, UINT64_MAX);
    assert_size(*state, 2);
    assert_none(*state, (UINT64_C(1) << 52U) - 1);
    assert_stale(*state, UINT64_C(1) << 52U, 1);
    assert_stale(*state, UINT64_MAX, 1);
    assert_next(*state, UINT64_MAX, 1);
    take_out(*state, 2);
    assert_size(*state, 1);
}

/* By less than 1/2048 of the greatest: with 1,000,000 entries, 256 numbers wide. */
static void little_is_lost_by_rounding(void **state)
{
    const uint64_t greatest = 1000000;
    for (uint64_t i = 1; i <= 1000; i++) {
        put(*state, i, i * (greatest / 1000));
    }
    for (uint64_t i = 1; i <= 1000; i++) {
        uint64_t scored = i * (greatest / 1000);
        assert_stale(*state, scored, i - 1);
        assert_stale(*state, scored + greatest / 2048, i);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_new_worklist_has_nothing_stale),
        TEST(stale_entries_take_turns_by_number),
        TEST(the_turn_goes_on_over_what_was_stored),
        TEST(what_has_been_scored_again_is_stale_no_more),
        TEST(scores_as_old_as_the_limit_are_not_stale),
        TEST(turns_go_on_when_entries_are_taken_out),
        TEST(nothing_is_read_when_nothing_is_stale),
        TEST(a_round_reads_each_entry_about_once),
        TEST(a_turn_that_cannot_be_read_is_not_lost),
        TEST(what_was_counted_and_is_not_there_is_damage),
        TEST(counts_follow_what_is_put_and_taken_out),
        TEST(counts_are_exact_while_each_number_has_its_bucket),
        TEST(buckets_are_twice_as_wide_when_a_number_lies_beyond),
        TEST(what_is_not_counted_has_no_turn),
        TEST(the_width_stays_when_the_great_number_leaves),
        TEST(any_number_has_a_bucket),
        TEST(little_is_lost_by_rounding),
    };
    return cmocka_run_group_tests_name("worklist_stale", tests, NULL, NULL);
}
