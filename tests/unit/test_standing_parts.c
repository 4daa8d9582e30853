/*
 * The standing taken apart and put together again. A disk of the test's own keeps each part as it
 * was last stored, as the model's store would.
 */
#include "daemon/learner/standing.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "tests/unit/standing_fixture.h"

enum {
    RING = STANDING_BLOCKS * STANDING_BLOCK_ITEMS,
    META_VALUES = 31, /* items, and three sums for each of ten classes */
    WITH_VALUES = 2 + 5 * RANKING_FIGURES,
    ALL_VALUES = 2 + 15 * RANKING_FIGURES,
    OPEN_BLOCK_ALL = 1 /* the part of the first block, all bands */
};

struct stored_part {
    size_t count; /* 0: never stored */
    double values[STANDING_PART_VALUES];
};

static size_t changed_parts(const struct standing *standing)
{
    size_t changed = 0;
    for (size_t part = 0; part < standing_part_count(); part++) {
        changed += standing_part_changed(standing, part) ? 1 : 0;
    }
    return changed;
}

static void store(struct standing *standing, struct stored_part *disk)
{
    for (size_t part = 0; part < standing_part_count(); part++) {
        if (standing_part_changed(standing, part)) {
            disk[part].count = standing_part_get(standing, part, disk[part].values);
        }
    }
    standing_clean(standing);
}

static struct standing *restored(const struct stored_part *disk)
{
    struct standing *standing = NULL;
    assert_int_equal(standing_new(&standing), 0);
    for (size_t part = standing_part_count(); part-- > 0;) {
        if (disk[part].count > 0) {
            assert_int_equal(
                standing_part_restore(standing, part, disk[part].values, disk[part].count), 0);
        }
    }
    return standing;
}

/* To the last bit, those of a NaN included. */
static void check_same(const struct standing *one, const struct standing *other)
{
    static const uint64_t windows[] = {0, 1, 100, 10000, RING};
    for (size_t i = 0; i < sizeof windows / sizeof windows[0]; i++) {
        struct standing_answer answers[2];
        standing_ask(one, windows[i], &answers[0]);
        standing_ask(other, windows[i], &answers[1]);
        assert_memory_equal(&answers[0], &answers[1], sizeof answers[0]);
    }
    struct standing_point points[2][STANDING_SEGMENTS];
    size_t count = standing_history(one, points[0]);
    assert_int_equal(standing_history(other, points[1]), count);
    assert_memory_equal(points[0], points[1], count * sizeof points[0][0]);
    struct reliability_row rows[2][RELIABILITY_CLASSES];
    standing_reliability(one, rows[0]);
    standing_reliability(other, rows[1]);
    assert_memory_equal(rows[0], rows[1], sizeof rows[0]);
}

static struct stored_part *new_disk(void)
{
    struct stored_part *disk = calloc(standing_part_count(), sizeof *disk);
    assert_non_null(disk);
    return disk;
}

/* --- storing and restoring ----------------------------------------------------------------------
 */

/* Stored now and then, among others right before and after a merge and around the ring's end. */
static void a_restored_standing_is_the_same_to_the_last_bit(void **state)
{
    static const uint64_t stops[] = {1, 63, 64, 65, 1000, 4095, 4096, 4097, 32768, 32800, 40001};
    struct stored_part *disk = new_disk();
    uint64_t from = 0;
    for (size_t i = 0; i < sizeof stops / sizeof stops[0]; i++) {
        add_drawn(*state, from, stops[i]);
        standing_ruled(*state, 0.37, i % 2 == 0);
        from = stops[i];
        store(*state, disk);
        struct standing *again = restored(disk);
        check_same(*state, again);
        standing_free(again);
    }
    free(disk);
}

/* Every other block is without a given tag, so that each merged segment is the left one of the two
 * as it was, in another place. */
static void what_a_merge_only_moves_is_stored_in_its_new_place(void **state)
{
    static const struct ranking_truth nothing[STANDING_BANDS] = {{NULL, 0}};
    static const struct ranking_list none[STANDING_BANDS] = {{NULL, 0}};
    struct stored_part *disk = new_disk();
    for (int i = 0; i < STANDING_SEGMENTS * STANDING_BLOCK_ITEMS; i++) {
        store(*state, disk);
        if (i / STANDING_BLOCK_ITEMS % 2 == 0) {
            add_one_tag(*state, i % 3 == 0, 1);
        } else {
            standing_add(*state, nothing, none, none);
        }
    }
    store(*state, disk);
    struct standing *again = restored(disk);
    check_same(*state, again);
    standing_free(again);
    free(disk);
}

static void a_restored_standing_goes_on_the_same(void **state)
{
    struct stored_part *disk = new_disk();
    add_drawn(*state, 0, 4090);
    store(*state, disk);
    struct standing *again = restored(disk);
    add_drawn(*state, 4090, 4300);
    add_drawn(again, 4090, 4300);
    check_same(*state, again);
    standing_free(again);
    free(disk);
}

static void restoring_marks_nothing_as_changed(void **state)
{
    struct stored_part *disk = new_disk();
    add_drawn(*state, 0, 100);
    store(*state, disk);
    struct standing *again = restored(disk);
    assert_int_equal(changed_parts(again), 0);
    standing_free(again);
    free(disk);
}

/* --- what changes -------------------------------------------------------------------------------
 */

static void a_new_standing_has_nothing_to_store(void **state)
{
    assert_int_equal(changed_parts(*state), 0);
}

static void an_item_changes_the_open_block_and_the_meta_part(void **state)
{
    add_drawn(*state, 0, 10);
    standing_clean(*state);
    add_drawn(*state, 10, 40);
    assert_int_equal(changed_parts(*state), 1 + STANDING_BANDS);
}

static void an_item_of_one_band_changes_no_other(void **state)
{
    add_drawn(*state, 0, 10);
    standing_clean(*state);
    add_one_tag(*state, true, 1);
    assert_int_equal(changed_parts(*state), 3); /* meta, all, tail */
}

static void the_last_item_of_a_block_changes_its_segment_too(void **state)
{
    add_drawn(*state, 0, 63);
    standing_clean(*state);
    add_drawn(*state, 63, 64);
    size_t changed = changed_parts(*state);
    assert_in_range(changed, 1 + STANDING_BANDS, 1 + 2 * STANDING_BANDS);
    assert_true(standing_part_changed(*state, 1 + STANDING_BLOCKS * STANDING_BANDS));
}

static void a_ruling_changes_the_meta_part_only(void **state)
{
    standing_ruled(*state, 0.5, true);
    assert_int_equal(changed_parts(*state), 1);
    assert_true(standing_part_changed(*state, 0));
}

static void a_part_is_as_short_as_what_it_holds(void **state)
{
    double values[STANDING_PART_VALUES];
    assert_int_equal(standing_part_get(*state, 0, values), META_VALUES);
    assert_int_equal(standing_part_get(*state, OPEN_BLOCK_ALL, values), 1);
    add_one_tag(*state, true, -1);
    assert_int_equal(standing_part_get(*state, OPEN_BLOCK_ALL, values), WITH_VALUES);
    add_one_tag(*state, true, 1);
    assert_int_equal(standing_part_get(*state, OPEN_BLOCK_ALL, values), ALL_VALUES);
    assert_true(ALL_VALUES * sizeof values[0] < 1900); /* stays in a leaf page */
}

/* --- what cannot be -----------------------------------------------------------------------------
 */

static void check_refused(struct standing *standing, size_t part, const double *values,
                          size_t count)
{
    assert_int_equal(standing_part_restore(standing, part, values, count), -EINVAL);
    assert_int_equal(standing_items(standing), 0);
    assert_int_equal(ask_all(standing, 0).items, 0);
    assert_int_equal(ask_all(standing, 1).items, 0);
}

static void a_part_that_is_none_is_refused(void **state)
{
    double values[1] = {0.0};
    check_refused(*state, standing_part_count(), values, 1);
    check_refused(*state, SIZE_MAX, values, 1);
}

static void a_part_of_the_wrong_length_is_refused(void **state)
{
    double values[STANDING_PART_VALUES] = {0.0};
    check_refused(*state, 0, values, META_VALUES - 1);
    check_refused(*state, 0, values, META_VALUES + 1);
    check_refused(*state, OPEN_BLOCK_ALL, values, 0);
    check_refused(*state, OPEN_BLOCK_ALL, values, STANDING_PART_VALUES);
    check_refused(*state, OPEN_BLOCK_ALL, values, WITH_VALUES); /* no items need one value */
    values[0] = 1.0;
    check_refused(*state, OPEN_BLOCK_ALL, values, 1);
    check_refused(*state, OPEN_BLOCK_ALL, values, WITH_VALUES - 1);
    check_refused(*state, OPEN_BLOCK_ALL, values, ALL_VALUES);
}

static void sums_that_are_no_sums_are_refused(void **state)
{
    double values[STANDING_PART_VALUES] = {1.0};
    values[7] = (double)NAN;
    check_refused(*state, OPEN_BLOCK_ALL, values, WITH_VALUES);
    values[7] = (double)INFINITY;
    check_refused(*state, OPEN_BLOCK_ALL, values, WITH_VALUES);
    values[7] = -1.0;
    check_refused(*state, OPEN_BLOCK_ALL, values, WITH_VALUES);
    values[7] = 0.0;
    values[1] = 2.0; /* two pairs of one item */
    check_refused(*state, OPEN_BLOCK_ALL, values, ALL_VALUES);
    values[1] = 1.0;
    assert_int_equal(standing_part_restore(*state, OPEN_BLOCK_ALL, values, ALL_VALUES), 0);
}

static void counts_that_are_no_counts_are_refused(void **state)
{
    static const double wrong[] = {-1.0, 0.5, 1e300, (double)NAN};
    double values[META_VALUES] = {0.0};
    for (size_t i = 0; i < sizeof wrong / sizeof wrong[0]; i++) {
        values[0] = wrong[i];
        check_refused(*state, 0, values, META_VALUES);
    }
    values[0] = 0.0;
    values[3] = 1.0; /* one confirmed of none shown */
    check_refused(*state, 0, values, META_VALUES);
    values[1] = 1.0;
    assert_int_equal(standing_part_restore(*state, 0, values, META_VALUES), 0);
}

#define test(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        test(a_restored_standing_is_the_same_to_the_last_bit),
        test(what_a_merge_only_moves_is_stored_in_its_new_place),
        test(a_restored_standing_goes_on_the_same),
        test(restoring_marks_nothing_as_changed),
        test(a_new_standing_has_nothing_to_store),
        test(an_item_changes_the_open_block_and_the_meta_part),
        test(an_item_of_one_band_changes_no_other),
        test(the_last_item_of_a_block_changes_its_segment_too),
        test(a_ruling_changes_the_meta_part_only),
        test(a_part_is_as_short_as_what_it_holds),
        test(a_part_that_is_none_is_refused),
        test(a_part_of_the_wrong_length_is_refused),
        test(sums_that_are_no_sums_are_refused),
        test(counts_that_are_no_counts_are_refused),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
