/* The worklist stored at any moment, and taken up again: nobody can tell. */
#include "daemon/learner/worklist.h"

#include <math.h>

#include "storage/model_store.h"
#include "tests/unit/repeatable.h"
#include "tests/unit/worklist_fixture.h"

enum {
    MOST_PARTS = 64,
    NUMBERS = 1500,
    ROUNDS = 20000
};

/* --- parts --------------------------------------------------------------------------------------
 */

/* What was stored of the counts. */
struct kept {
    size_t counts[MOST_PARTS]; /* 0: never stored */
    double values[MOST_PARTS][WORKLIST_PART_VALUES];
};

static void keep(struct kept *kept, const struct worklist *worklist)
{
    assert_true(worklist_part_count() <= MOST_PARTS);
    for (size_t part = 0; part < worklist_part_count(); part++) {
        if (worklist_part_changed(worklist, part)) {
            kept->counts[part] = worklist_part_get(worklist, part, kept->values[part]);
            assert_true(kept->counts[part] >= 1);
        }
    }
}

/* The last part first. */
static int restore(const struct kept *kept, struct worklist *worklist)
{
    for (size_t part = worklist_part_count(); part-- > 0;) {
        if (kept->counts[part] > 0) {
            int result =
                worklist_part_restore(worklist, part, kept->values[part], kept->counts[part]);
            if (result < 0) {
                return result;
            }
        }
    }
    return worklist_restored(worklist);
}

/* Begins again with what was stored, as after a crash. */
static void take_up_again(struct listing *listing, const struct kept *kept)
{
    worklist_free(listing->worklist);
    assert_int_equal(worklist_new(&listing->worklist), 0);
    assert_int_equal(restore(kept, listing->worklist), 0);
}

static size_t changed_parts(const struct listing *listing)
{
    size_t changed = 0;
    for (size_t part = 0; part < worklist_part_count(); part++) {
        changed += worklist_part_changed(listing->worklist, part);
    }
    return changed;
}

static void every_part_fits_into_a_list_of_the_store(void **state)
{
    const struct listing *listing = *state;
    double values[WORKLIST_PART_VALUES];
    for (size_t part = 0; part < worklist_part_count(); part++) {
        size_t count = worklist_part_get(listing->worklist, part, values);
        assert_in_range(count, 1, MODEL_STORE_MOST_FIGURES);
    }
}

static void a_new_worklist_has_no_changed_part(void **state)
{
    assert_int_equal(changed_parts(*state), 0);
}

/* The size, and the row of the bucket. */
static void an_entry_changes_two_parts_until_they_are_stored(void **state)
{
    struct listing *listing = *state;
    put(listing, 1, 10);
    assert_int_equal(changed_parts(listing), 2);
    store(listing);
    assert_int_equal(changed_parts(listing), 0);
    put(listing, 2, 4000);
    assert_int_equal(changed_parts(listing), 2);
    store(listing);
    put(listing, 1, 4001); /* from one row into another */
    assert_int_equal(changed_parts(listing), 3);
    store(listing);
    take_out(listing, 1);
    assert_int_equal(changed_parts(listing), 2);
}

static void wider_buckets_change_all_parts(void **state)
{
    put(*state, 1, 10);
    store(*state);
    put(*state, 2, 5000);
    assert_int_equal(changed_parts(*state), worklist_part_count());
}

static void a_turn_changes_one_part(void **state)
{
    struct worklist_entry entry;
    put(*state, 1, 10);
    store(*state);
    assert_int_equal(next_stale(*state, 50, &entry), 0);
    assert_int_equal(changed_parts(*state), 1);
}

static void what_was_restored_counts_as_before(void **state)
{
    struct listing *listing = *state;
    struct kept kept = {0};
    struct worklist_entry entry;
    put(listing, 1, 10);
    put(listing, UINT64_MAX, 11);
    put(listing, 3, 10000);
    assert_int_equal(next_stale(listing, 12, &entry), 0);
    assert_true(entry.number == 1);
    assert_int_equal(next_stale(listing, 12, &entry), 0);
    keep(&kept, listing->worklist);
    store(listing);
    take_up_again(listing, &kept);
    assert_int_equal(changed_parts(listing), 0);
    assert_size(listing, 3);
    assert_stale(listing, 12, 2);
    assert_stale(listing, UINT64_MAX, 3);
    assert_int_equal(next_stale(listing, 12, &entry), 0);
    assert_true(entry.number == 1); /* the turn was the greatest number's */
}

static void what_cannot_be_a_part_is_refused(void **state)
{
    struct listing *listing = *state;
    struct worklist *worklist = listing->worklist;
    double values[WORKLIST_PART_VALUES] = {0};
    put(listing, 1, 10);
    size_t count = worklist_part_get(worklist, 0, values);
    assert_int_equal(worklist_part_restore(worklist, worklist_part_count(), values, count),
                     -EINVAL);
    assert_int_equal(worklist_part_restore(worklist, 0, values, count - 1), -EINVAL);
    const double wrong[] = {-1.0, 0.5, NAN, INFINITY, 0x1p64};
    for (size_t i = 0; i < sizeof wrong / sizeof *wrong; i++) {
        for (size_t part = 0; part < 2; part++) {
            count = worklist_part_get(worklist, part, values);
            for (size_t place = 0; place < count; place++) {
                double right = values[place];
                values[place] = wrong[i];
                assert_int_equal(worklist_part_restore(worklist, part, values, count), -EINVAL);
                values[place] = right;
            }
        }
    }
    assert_size(listing, 1);
    assert_stale(listing, 11, 1);
}

/* No bucket is wider than 2^52. */
static void buckets_that_are_too_wide_are_refused(void **state)
{
    struct listing *listing = *state;
    double values[WORKLIST_PART_VALUES] = {0};
    size_t count = worklist_part_get(listing->worklist, 0, values);
    values[1] = 52.0;
    assert_int_equal(worklist_part_restore(listing->worklist, 0, values, count), 0);
    values[1] = 53.0;
    assert_int_equal(worklist_part_restore(listing->worklist, 0, values, count), -EINVAL);
}

static void parts_of_different_moments_are_refused(void **state)
{
    struct listing *listing = *state;
    struct kept kept = {0};
    put(listing, 1, 10);
    keep(&kept, listing->worklist);
    const double sizes[] = {0.0, 2.0};
    for (size_t i = 0; i < sizeof sizes / sizeof sizes[0]; i++) {
        struct worklist *other = NULL;
        kept.values[0][0] = sizes[i];
        assert_int_equal(worklist_new(&other), 0);
        assert_int_equal(restore(&kept, other), -EINVAL);
        worklist_free(other);
    }
}

/* --- stored at any moment -----------------------------------------------------------------------
 */

/* The same changes happen to both; `stored` alone is stored every now and then. */
struct twins {
    struct listing plain;
    struct listing stored;
    struct kept kept;
    uint64_t scored[NUMBERS]; /* what should be there; 0: nothing */
};

static int set_up_twins(void **state)
{
    struct twins *twins = calloc(1, sizeof *twins);
    assert_non_null(twins);
    listing_init(&twins->plain);
    listing_init(&twins->stored);
    *state = twins;
    return 0;
}

static int tear_down_twins(void **state)
{
    struct twins *twins = *state;
    listing_deinit(&twins->plain);
    listing_deinit(&twins->stored);
    free(twins);
    return 0;
}

static void put_both(struct twins *twins, uint64_t number, uint64_t scored)
{
    put(&twins->plain, number, scored);
    put(&twins->stored, number, scored);
    twins->scored[number] = scored;
}

static void take_out_both(struct twins *twins, uint64_t number)
{
    take_out(&twins->plain, number);
    take_out(&twins->stored, number);
    twins->scored[number] = 0;
}

/* Takes a turn, and scores that entry again, as idle time does. */
static void rescore_both(struct twins *twins, uint64_t now)
{
    struct worklist_entry one = {.number = 0};
    struct worklist_entry other = {.number = 0};
    uint64_t limit = now - now / 8;
    int result = next_stale(&twins->plain, limit, &one);
    assert_int_equal(next_stale(&twins->stored, limit, &other), result);
    assert_true(one.number == other.number);
    if (result == 0) {
        assert_true(one.scored < limit);
        put_both(twins, one.number, now);
    }
}

static void assert_same_counts(const struct twins *twins, uint64_t now)
{
    size_t size = 0;
    for (size_t number = 0; number < NUMBERS; number++) {
        size += twins->scored[number] > 0;
    }
    assert_size(&twins->plain, size);
    assert_size(&twins->stored, size);
    for (uint64_t scored = 0; scored <= now + 100; scored += 1 + now / 50) {
        assert_stale(&twins->stored, scored, worklist_count_stale(twins->plain.worklist, scored));
    }
}

/* Found one by one, and in a walk. */
static void assert_same_entries(const struct twins *twins)
{
    struct worklist_entry one = {.number = 0};
    struct worklist_entry other = {.number = 0};
    for (uint64_t number = 1; number < NUMBERS; number++) {
        if (twins->scored[number] == 0) {
            assert_lacks(&twins->plain, number);
            assert_lacks(&twins->stored, number);
            continue;
        }
        assert_holds(&twins->plain, number, twins->scored[number]);
        assert_holds(&twins->stored, number, twins->scored[number]);
        assert_int_equal(next_after(&twins->plain, one.number, &one), 0);
        assert_int_equal(next_after(&twins->stored, other.number, &other), 0);
        assert_is_entry(&one, number, twins->scored[number]);
        assert_is_entry(&other, number, twins->scored[number]);
    }
    assert_int_equal(next_after(&twins->plain, one.number, &one), -ENOENT);
    assert_int_equal(next_after(&twins->stored, other.number, &other), -ENOENT);
}

static void store_one(struct twins *twins)
{
    keep(&twins->kept, twins->stored.worklist);
    store(&twins->stored);
}

static void change_both(struct twins *twins, struct repeatable *random, uint64_t now)
{
    uint64_t number = 1 + repeatable_below(random, NUMBERS - 1);
    switch (repeatable_below(random, 4)) {
    case 0:
        take_out_both(twins, number);
        break;
    case 1:
        rescore_both(twins, now);
        break;
    default:
        put_both(twins, number, now);
    }
}

static void nobody_can_tell_when_it_was_stored(void **state)
{
    struct twins *twins = *state;
    struct repeatable random = {.state = 21};
    size_t times = 0;
    for (uint64_t now = 1; now <= ROUNDS; now++) {
        change_both(twins, &random, now);
        if (repeatable_below(&random, 100) == 0) {
            store_one(twins);
            times++;
        }
        if (now % 500 == 0) {
            assert_same_counts(twins, now);
            assert_same_entries(twins);
        }
    }
    assert_true(times > 100);
}

/* It is taken up again right after it was stored, from what was stored of it alone. */
static void nobody_can_tell_when_it_was_taken_up_again(void **state)
{
    struct twins *twins = *state;
    struct repeatable random = {.state = 22};
    for (uint64_t now = 1; now <= ROUNDS; now++) {
        change_both(twins, &random, now);
        if (repeatable_below(&random, 100) == 0) {
            store_one(twins);
            take_up_again(&twins->stored, &twins->kept);
        }
        if (now % 500 == 0) {
            assert_same_counts(twins, now);
            assert_same_entries(twins);
        }
    }
}

/* While what has changed is stored already and not yet forgotten. */
static void changes_may_lie_over_a_base_that_has_them(void **state)
{
    struct twins *twins = *state;
    struct repeatable random = {.state = 23};
    struct fake_base *base = &twins->stored.stored;
    for (uint64_t now = 1; now <= ROUNDS / 4; now++) {
        change_both(twins, &random, now);
        if (now % 250 == 0) {
            assert_int_equal(
                worklist_changes(twins->stored.worklist, fake_base_put, fake_base_gone, base), 0);
            assert_same_counts(twins, now);
            assert_same_entries(twins);
            worklist_clean(twins->stored.worklist);
            assert_same_entries(twins);
        }
    }
}

#define TWINS_TEST(name) cmocka_unit_test_setup_teardown(name, set_up_twins, tear_down_twins)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(every_part_fits_into_a_list_of_the_store),
        TEST(a_new_worklist_has_no_changed_part),
        TEST(an_entry_changes_two_parts_until_they_are_stored),
        TEST(wider_buckets_change_all_parts),
        TEST(a_turn_changes_one_part),
        TEST(what_was_restored_counts_as_before),
        TEST(what_cannot_be_a_part_is_refused),
        TEST(buckets_that_are_too_wide_are_refused),
        TEST(parts_of_different_moments_are_refused),
        TWINS_TEST(nobody_can_tell_when_it_was_stored),
        TWINS_TEST(nobody_can_tell_when_it_was_taken_up_again),
        TWINS_TEST(changes_may_lie_over_a_base_that_has_them),
    };
    return cmocka_run_group_tests_name("worklist_parts", tests, NULL, NULL);
}
