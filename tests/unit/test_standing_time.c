/*
 * Windows and history against a plain recount, item by item, of everything that was added; also
 * when the ring of 512 blocks has wrapped and when the 64 segments have been merged.
 */
#include "daemon/learner/standing.h"

#include "tests/unit/standing_fixture.h"

enum {
    RING = STANDING_BLOCKS * STANDING_BLOCK_ITEMS,
    FULL_HISTORY = STANDING_SEGMENTS * STANDING_BLOCK_ITEMS
};

struct recount {
    uint64_t items;
    double value[RANKING_FIGURES];
};

static const struct ranking_list *lists_of(const struct drawn_item *item, bool is_shadow)
{
    return is_shadow ? item->without : item->with;
}

static struct recount recount(uint64_t from, uint64_t to, size_t band, bool is_shadow)
{
    struct recount counted = {0};
    struct ranking_amounts sums = {{0}};
    struct ranking_amounts base_sums = {{0}};
    for (uint64_t number = from; number < to; number++) {
        struct drawn_item item;
        struct ranking_amounts amounts;
        struct ranking_amounts bases;
        draw_item(number, &item);
        if (item.truths[band].count == 0) {
            continue;
        }
        ranking_amounts(&item.truths[band], &lists_of(&item, is_shadow)[band], &amounts);
        ranking_bases(&item.truths[band], &bases);
        counted.items++;
        for (size_t i = 0; i < RANKING_FIGURES; i++) {
            sums.of[i] += amounts.of[i];
            base_sums.of[i] += bases.of[i];
        }
    }
    for (size_t i = 0; i < RANKING_FIGURES; i++) {
        counted.value[i] = sums.of[i] / base_sums.of[i];
    }
    return counted;
}

/* --- windows ------------------------------------------------------------------------------------
 */

/* A gain over nothing is unknown. */
static void check_gain(double gain, double with, double without)
{
    if (without > 0.0) {
        assert_near(gain, with / without - 1.0, 1e-12);
    } else {
        assert_true(isnan(gain));
    }
}

/* `window` asked for of `to` drawn items must be the items from `from` on. */
static void check_window(const struct standing *standing, uint64_t window, uint64_t from,
                         uint64_t to)
{
    struct standing_answer answer;
    standing_ask(standing, window, &answer);
    assert_int_equal(answer.items, to - from);
    for (size_t band = 0; band < STANDING_BANDS; band++) {
        struct recount with = recount(from, to, band, false);
        struct recount without = recount(from, to, band, true);
        assert_int_equal(answer.bands[band].items, with.items);
        for (size_t i = 0; i < RANKING_FIGURES; i++) {
            assert_near(answer.bands[band].with[i].value, with.value[i], 1e-12);
            assert_near(answer.bands[band].without[i].value, without.value[i], 1e-12);
            check_gain(answer.bands[band].gain[i].value, with.value[i], without.value[i]);
        }
    }
}

static void a_window_is_rounded_up_to_whole_blocks(void **state)
{
    add_drawn(*state, 0, 1000); /* 15 blocks of 64 and an open one of 40 */
    check_window(*state, 1, 960, 1000);
    check_window(*state, 40, 960, 1000);
    check_window(*state, 41, 896, 1000);
    check_window(*state, 104, 896, 1000);
    check_window(*state, 500, 448, 1000);
}

static void a_window_right_after_a_block_is_full_is_that_block(void **state)
{
    add_drawn(*state, 0, 1024);
    check_window(*state, 1, 960, 1024);
    check_window(*state, 64, 960, 1024);
    check_window(*state, 65, 896, 1024);
}

static void a_window_beyond_the_first_item_is_all(void **state)
{
    add_drawn(*state, 0, 1000);
    check_window(*state, 1000, 0, 1000);
    check_window(*state, UINT64_MAX, 0, 1000);
    check_window(*state, 0, 0, 1000);
}

static void a_window_slides_on_when_the_ring_has_wrapped(void **state)
{
    uint64_t items = RING + 5000; /* 512 + 78 blocks, and 8 items open */
    add_drawn(*state, 0, items);
    check_window(*state, 1, items - 8, items);
    check_window(*state, 10000, items - 10056, items); /* 8 + 157·64 */
    check_window(*state, 5000, items - 5000, items);   /* 8 + 78·64 */
}

static void the_ring_holds_511_blocks_and_the_open_one(void **state)
{
    uint64_t items = RING + 5000;
    add_drawn(*state, 0, items);
    check_window(*state, RING, items - 8 - (STANDING_BLOCKS - 1) * STANDING_BLOCK_ITEMS, items);
}

static void the_ring_holds_512_blocks_while_none_is_open(void **state)
{
    uint64_t items = RING + 640;
    add_drawn(*state, 0, items);
    check_window(*state, UINT64_MAX, items - RING, items);
}

static void all_time_goes_on_when_the_ring_has_wrapped(void **state)
{
    add_drawn(*state, 0, RING + 5000);
    check_window(*state, 0, 0, RING + 5000);
}

static void counts_for_all_time_are_exact(void **state)
{
    add_drawn(*state, 0, FULL_HISTORY * 3);
    struct standing_in_band all = ask_all(*state, 0);
    struct recount counted = recount(0, FULL_HISTORY * 3, STANDING_ALL, false);
    assert_near(all.with[RANKING_P1].value, counted.value[RANKING_P1], 0.0);
    assert_near(all.with[RANKING_P5].value, counted.value[RANKING_P5], 0.0);
}

/* --- history ------------------------------------------------------------------------------------
 */

/* Of `items` drawn items, points of `length` items each, the last one shorter. */
static void check_history(const struct standing *standing, uint64_t items, uint64_t length)
{
    struct standing_point points[STANDING_SEGMENTS];
    size_t count = standing_history(standing, points);
    assert_int_equal(count, (items + length - 1) / length);
    for (size_t i = 0; i < count; i++) {
        uint64_t from = i * length;
        uint64_t to = from + length < items ? from + length : items;
        struct recount with = recount(from, to, STANDING_ALL, false);
        struct recount without = recount(from, to, STANDING_ALL, true);
        assert_int_equal(points[i].items, to - from);
        for (size_t figure = 0; figure < RANKING_FIGURES; figure++) {
            assert_near(points[i].with[figure], with.value[figure], 1e-12);
            assert_near(points[i].without[figure], without.value[figure], 1e-12);
        }
    }
}

static void a_new_standing_has_no_history(void **state)
{
    struct standing_point points[STANDING_SEGMENTS];
    assert_int_equal(standing_history(*state, points), 0);
}

static void a_point_covers_a_block_at_first(void **state)
{
    add_drawn(*state, 0, 10);
    check_history(*state, 10, 64);
    add_drawn(*state, 10, 300);
    check_history(*state, 300, 64);
}

static void neighbours_are_merged_when_the_history_is_full(void **state)
{
    add_drawn(*state, 0, FULL_HISTORY - 1);
    check_history(*state, FULL_HISTORY - 1, 64);
    add_drawn(*state, FULL_HISTORY - 1, FULL_HISTORY);
    check_history(*state, FULL_HISTORY, 128);
    add_drawn(*state, FULL_HISTORY, FULL_HISTORY + 1);
    check_history(*state, FULL_HISTORY + 1, 128);
}

static void the_history_is_merged_again_and_again(void **state)
{
    uint64_t items = 5 * (uint64_t)FULL_HISTORY + 100; /* merged at 1, 2 and 4 times */
    add_drawn(*state, 0, items);
    check_history(*state, items, 512);
}

static void a_stretch_without_a_shadow_has_no_value_of_it(void **state)
{
    for (int i = 0; i < STANDING_BLOCK_ITEMS; i++) {
        add_one_tag(*state, true, -1);
    }
    add_one_tag(*state, true, 1);
    struct standing_point points[STANDING_SEGMENTS];
    assert_int_equal(standing_history(*state, points), 2);
    assert_true(isnan(points[0].without[RANKING_P1]));
    assert_near(points[0].with[RANKING_P1], 1.0, 0.0);
    assert_near(points[1].without[RANKING_P1], 1.0, 0.0);
}

#define test(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        test(a_window_is_rounded_up_to_whole_blocks),
        test(a_window_right_after_a_block_is_full_is_that_block),
        test(a_window_beyond_the_first_item_is_all),
        test(a_window_slides_on_when_the_ring_has_wrapped),
        test(the_ring_holds_511_blocks_and_the_open_one),
        test(the_ring_holds_512_blocks_while_none_is_open),
        test(all_time_goes_on_when_the_ring_has_wrapped),
        test(counts_for_all_time_are_exact),
        test(a_new_standing_has_no_history),
        test(a_point_covers_a_block_at_first),
        test(neighbours_are_merged_when_the_history_is_full),
        test(the_history_is_merged_again_and_again),
        test(a_stretch_without_a_shadow_has_no_value_of_it),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
