/* The worklist's entries while what has changed is on its way to the store. */
#include "daemon/learner/worklist.h"

#include "tests/unit/worklist_fixture.h"

/* What has changed is collected, and has not arrived. */
static void seal(struct listing *listing, struct fake_base *arriving)
{
    fake_base_init(arriving);
    struct worklist_entry entry = {.number = 0};
    while (fake_base_entry_after(&listing->stored, entry.number, &entry) == 0) {
        (void)fake_base_put(arriving, &entry);
    }
    assert_int_equal(worklist_changes(listing->worklist, fake_base_put, fake_base_gone, arriving),
                     0);
    assert_int_equal(worklist_seal(listing->worklist), 0);
}

/* The base has it; the worklist is told a moment later. */
static void arrive(struct listing *listing, struct fake_base *arriving)
{
    fake_base_deinit(&listing->stored);
    listing->stored = *arriving;
    listing->stored.base.user = &listing->stored;
}

static void what_is_on_its_way_is_found(void **state)
{
    struct listing *listing = *state;
    struct fake_base arriving;
    put(listing, 1, 10);
    seal(listing, &arriving);
    assert_holds(listing, 1, 10);
    arrive(listing, &arriving);
    assert_holds(listing, 1, 10);
    worklist_stored(listing->worklist);
    assert_holds(listing, 1, 10);
    assert_size(listing, 1);
}

static void what_changes_meanwhile_is_found_as_it_is_now(void **state)
{
    struct listing *listing = *state;
    struct fake_base arriving;
    put(listing, 1, 10);
    put(listing, 2, 20);
    seal(listing, &arriving);
    put(listing, 1, 15);
    take_out(listing, 2);
    put(listing, 3, 30);
    for (int i = 0; i < 2; i++) {
        assert_holds(listing, 1, 15);
        assert_lacks(listing, 2);
        assert_holds(listing, 3, 30);
        assert_size(listing, 2);
        if (i == 0) {
            arrive(listing, &arriving);
            worklist_stored(listing->worklist);
        }
    }
    store(listing);
    assert_holds(listing, 1, 15);
    assert_lacks(listing, 2);
}

static void a_walk_meets_each_entry_once_whatever_lies_where(void **state)
{
    struct listing *listing = *state;
    struct fake_base arriving;
    struct worklist_entry entry = {.number = 0};
    for (uint64_t number = 1; number <= 6; number++) {
        put(listing, number, 10);
    }
    store(listing);
    put(listing, 2, 20); /* sealed, over the base's */
    take_out(listing, 3);
    put(listing, 7, 20);
    seal(listing, &arriving);
    put(listing, 2, 30); /* over both */
    put(listing, 3, 30);
    take_out(listing, 5);
    take_out(listing, 7);
    static const uint64_t numbers[] = {1, 2, 3, 4, 6};
    static const uint64_t scored[] = {10, 30, 30, 10, 10};
    for (size_t i = 0; i < 5; i++) {
        assert_int_equal(next_after(listing, entry.number, &entry), 0);
        assert_is_entry(&entry, numbers[i], scored[i]);
    }
    assert_int_equal(next_after(listing, entry.number, &entry), -ENOENT);
    fake_base_deinit(&arriving);
}

static int note_gone(void *user, uint64_t number)
{
    *(uint64_t *)user = *(uint64_t *)user * 10 + number;
    return 0;
}

static int note_put(void *user, const struct worklist_entry *entry)
{
    (void)user;
    return entry->number == 1 || entry->number == 3 ? 0 : -EINVAL;
}

/* 2 was never stored: it is told as gone, as if it had been. */
static void what_did_not_arrive_is_told_once_more_with_what_came_since(void **state)
{
    struct listing *listing = *state;
    struct fake_base lost;
    uint64_t gone = 0;
    put(listing, 1, 10);
    put(listing, 2, 20);
    seal(listing, &lost);
    fake_base_deinit(&lost);
    take_out(listing, 2);
    put(listing, 3, 30);
    assert_int_equal(worklist_changes(listing->worklist, note_put, note_gone, &gone), 0);
    assert_int_equal(gone, 2);
    assert_int_equal(worklist_seal(listing->worklist), 0);
    assert_holds(listing, 1, 10);
    assert_lacks(listing, 2);
    assert_holds(listing, 3, 30);
    worklist_clean(listing->worklist);
    assert_lacks(listing, 1); /* nothing has arrived */
}

static void parts_are_to_be_stored_until_they_have_arrived(void **state)
{
    struct listing *listing = *state;
    struct fake_base arriving;
    put(listing, 1, 10);
    seal(listing, &arriving);
    assert_true(worklist_part_changed(listing->worklist, 0));
    arrive(listing, &arriving);
    worklist_stored(listing->worklist);
    assert_false(worklist_part_changed(listing->worklist, 0));
}

static void the_memory_of_what_has_arrived_is_given_back(void **state)
{
    struct listing *listing = *state;
    struct fake_base arriving;
    uint64_t empty = worklist_bytes(listing->worklist);
    put(listing, 1, 10);
    seal(listing, &arriving);
    assert_true(worklist_bytes(listing->worklist) > empty);
    arrive(listing, &arriving);
    worklist_stored(listing->worklist);
    assert_int_equal(worklist_bytes(listing->worklist), empty);
}

int main(void)
{
#define seal_test(name) cmocka_unit_test_setup_teardown(name, set_up_listing, tear_down_listing)
    const struct CMUnitTest tests[] = {
        seal_test(what_is_on_its_way_is_found),
        seal_test(what_changes_meanwhile_is_found_as_it_is_now),
        seal_test(a_walk_meets_each_entry_once_whatever_lies_where),
        seal_test(what_did_not_arrive_is_told_once_more_with_what_came_since),
        seal_test(parts_are_to_be_stored_until_they_have_arrived),
        seal_test(the_memory_of_what_has_arrived_is_given_back),
    };
    return cmocka_run_group_tests_name("worklist on its way to the store", tests, NULL, NULL);
}
