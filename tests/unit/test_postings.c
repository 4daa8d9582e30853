/* A word's postings in memory: appended, marked, replaced, dropped. */
#include "daemon/learner/postings.h"

#include <errno.h>
#include <stdlib.h>

#include "tests/unit/near.h"
#include "tests/unit/postings_look.h"

enum {
    LANES = 1,
    STRIDE = 1 + LANES,
    WORD = 7
};

static int set_up(void **state)
{
    return postings_new(LANES, (struct postings **)state);
}

static int tear_down(void **state)
{
    postings_free(*state);
    return 0;
}

/* Posting i: tag 3i, cell 5i + 1. */
static void append_to(struct postings *postings, uint32_t word, uint32_t count)
{
    for (uint32_t i = 0; i < count; i++) {
        uint32_t place = 0;
        uint32_t at = 0;
        assert_int_equal(postings_append(postings, word, 3 * i, &place, &at), 0);
        uint32_t *posting = postings_at(postings, place)->numbers + (size_t)at * STRIDE;
        assert_int_equal(posting[1], 0);
        posting[1] = 5 * i + 1;
    }
}

static void append(struct postings *postings, uint32_t count)
{
    append_to(postings, WORD, count);
}

static struct chunk *chunk_of(const struct postings *postings, uint32_t word, uint32_t number)
{
    return postings_at(postings, place_of(postings, word, number));
}

static void a_word_without_postings_has_no_chunk(void **state)
{
    const struct postings *postings = *state;
    struct postings_walk walk;
    const uint32_t *numbers = NULL;
    size_t count = 0;
    assert_int_equal(chunks_of(postings, WORD), 0);
    assert_int_equal(postings_count(postings, WORD), 0);
    postings_walk_begin(postings, NULL, WORD, &walk);
    assert_int_equal(postings_walk_next(&walk, &numbers, &count), -ENOENT);
    assert_null(numbers);
}

static void postings_keep_their_order_and_their_numbers(void **state)
{
    struct postings *postings = *state;
    struct postings_walk walk;
    const uint32_t *numbers = NULL;
    size_t count = 0;
    uint32_t seen = 0;
    append(postings, 1000);
    assert_int_equal(postings_count(postings, WORD), 1000);
    postings_walk_begin(postings, NULL, WORD, &walk);
    while (postings_walk_next(&walk, &numbers, &count) == 0) {
        for (size_t j = 0; j < count; j++, seen++) {
            assert_int_equal(numbers[j * STRIDE], 3 * seen);
            assert_int_equal(numbers[j * STRIDE + 1], 5 * seen + 1);
        }
    }
    assert_int_equal(seen, 1000);
}

static void a_posting_has_a_cell_for_each_lane(void **state)
{
    (void)state;
    struct postings *postings = NULL;
    uint32_t place = 0;
    uint32_t at = 0;
    assert_int_equal(postings_new(2, &postings), 0);
    assert_int_equal(postings_stride(postings), 3);
    assert_int_equal(postings_append(postings, WORD, 4, &place, &at), 0);
    assert_int_equal(postings_append(postings, WORD, 5, &place, &at), 0);
    const uint32_t expected[] = {4, 0, 0, 5, 0, 0};
    assert_memory_equal(postings_at(postings, place)->numbers, expected, sizeof expected);
    postings_free(postings);
}

static void a_chunk_holds_one_hundred_and_sixty(void **state)
{
    struct postings *postings = *state;
    append(postings, 1);
    assert_int_equal(chunks_of(postings, WORD), 1);
    append(postings, 159);
    assert_int_equal(chunks_of(postings, WORD), 1);
    append(postings, 1);
    assert_int_equal(chunks_of(postings, WORD), 2);
    assert_int_equal(chunk_of(postings, WORD, 0)->count, 160);
    assert_int_equal(chunk_of(postings, WORD, 1)->count, 1);
}

static void words_do_not_mix(void **state)
{
    struct postings *postings = *state;
    append_to(postings, 1, 200);
    append_to(postings, 0, 3);
    append_to(postings, 1, 10);
    assert_int_equal(postings_count(postings, 0), 3);
    assert_int_equal(postings_count(postings, 1), 210);
    assert_int_equal(chunk_of(postings, 1, 1)->word, 1);
    assert_int_equal(chunk_of(postings, 1, 1)->number, 1);
    assert_int_equal(chunk_of(postings, 1, 1)->count, 50);
}

/* --- what has changed ---------------------------------------------------------------------------
 */

static void an_append_marks_its_own_chunk_alone(void **state)
{
    struct postings *postings = *state;
    append(postings, 2 * POSTINGS_CHUNK);
    postings_clean(postings);
    append(postings, 1);
    assert_false(chunk_of(postings, WORD, 0)->is_changed);
    assert_false(chunk_of(postings, WORD, 1)->is_changed);
    assert_true(chunk_of(postings, WORD, 2)->is_changed);
    assert_int_equal(postings_changed_count(postings), 1);
}

static void a_touch_marks_a_chunk_once(void **state)
{
    struct postings *postings = *state;
    append(postings, 2 * POSTINGS_CHUNK + 1);
    postings_clean(postings);
    assert_int_equal(postings_touch(postings, place_of(postings, WORD, 1)), 0);
    assert_int_equal(postings_touch(postings, place_of(postings, WORD, 1)), 0);
    assert_int_equal(postings_changed_count(postings), 1);
    assert_false(chunk_of(postings, WORD, 0)->is_changed);
    assert_true(chunk_of(postings, WORD, 1)->is_changed);
    assert_false(chunk_of(postings, WORD, 2)->is_changed);
}

/* Chunk 1 grows from 4 postings to 160, and stays what it was. */
static void marks_outlive_a_larger_block(void **state)
{
    struct postings *postings = *state;
    append(postings, POSTINGS_CHUNK + 1);
    postings_clean(postings);
    append(postings, POSTINGS_CHUNK - 1);
    assert_int_equal(chunks_of(postings, WORD), 2);
    assert_false(chunk_of(postings, WORD, 0)->is_changed);
    assert_true(chunk_of(postings, WORD, 1)->is_changed);
    postings_clean(postings);
    append(postings, 1000);
    assert_false(chunk_of(postings, WORD, 1)->is_changed);
}

struct told {
    uint32_t word;
    uint32_t number;
    size_t count;
};

static void assert_changed(const struct postings *postings, const struct told *expected,
                           size_t expected_count)
{
    uint32_t *places = NULL;
    size_t count = 0;
    assert_int_equal(postings_changed(postings, &places, &count), 0);
    assert_int_equal(count, expected_count);
    assert_non_null(places);
    for (size_t i = 0; places && i < expected_count; i++) {
        const struct chunk *chunk = postings_at(postings, places[i]);
        assert_int_equal(chunk->word, expected[i].word);
        assert_int_equal(chunk->number, expected[i].number);
        assert_int_equal(chunk->count, expected[i].count);
    }
    assert_true(postings_changed_count(postings) >= count);
    free(places);
}

static void nothing_that_has_changed_is_an_empty_list(void **state)
{
    struct postings *postings = *state;
    assert_changed(postings, NULL, 0);
    append(postings, 500);
    postings_clean(postings);
    assert_changed(postings, NULL, 0);
    assert_int_equal(postings_changed_count(postings), 0);
}

static void what_has_changed_is_told_by_rising_word_and_number(void **state)
{
    struct postings *postings = *state;
    append_to(postings, 90, 1);
    append_to(postings, 4000000000U, 2);
    append_to(postings, 3, 320);
    append_to(postings, 5, 161);
    append_to(postings, 3, 4);
    const struct told expected[] = {{3, 0, 160}, {3, 1, 160}, {3, 2, 4},          {5, 0, 160},
                                    {5, 1, 1},   {90, 0, 1},  {4000000000U, 0, 2}};
    assert_changed(postings, expected, sizeof expected / sizeof *expected);
}

/* The places of 20 are taken by 10 and 30, in one order or the other, while they are still listed.
 */
static void a_place_that_was_dropped_and_taken_again_is_told_once(void **state)
{
    struct postings *postings = *state;
    append_to(postings, 20, 161);
    append_to(postings, 40, 1);
    assert_int_equal(postings_drop(postings, 20), 161);
    append_to(postings, 30, 2);
    append_to(postings, 10, 3);
    assert_int_equal(postings_drop(postings, 30), 2);
    append_to(postings, 30, 4);
    const struct told expected[] = {{10, 0, 3}, {30, 0, 4}, {40, 0, 1}};
    assert_changed(postings, expected, 3);
}

static void what_was_dropped_is_not_told(void **state)
{
    struct postings *postings = *state;
    append_to(postings, 20, 161);
    append_to(postings, 40, 1);
    (void)postings_drop(postings, 20);
    const struct told expected[] = {{40, 0, 1}};
    assert_changed(postings, expected, 1);
    (void)postings_drop(postings, 40);
    assert_changed(postings, NULL, 0);
    postings_clean(postings);
    append_to(postings, 40, 5);
    const struct told again[] = {{40, 0, 5}};
    assert_changed(postings, again, 1);
}

/* --- replacing ----------------------------------------------------------------------------------
 */

static void a_word_without_postings_has_none_to_replace(void **state)
{
    struct postings *postings = *state;
    size_t cuts = 77;
    assert_int_equal(postings_admit(postings, NULL, WORD), 0);
    assert_int_equal(postings_replace(postings, WORD, NULL, 0), 0);
    (void)postings_cuts(postings, &cuts);
    assert_int_equal(cuts, 0);
    assert_int_equal(postings_count(postings, WORD), 0);
}

static void fewer_postings_take_fewer_chunks_and_the_rest_is_cut(void **state)
{
    struct postings *postings = *state;
    enum {
        LEFT = 161
    };
    uint32_t numbers[LEFT * STRIDE];
    size_t cut_count = 0;
    append(postings, 4 * POSTINGS_CHUNK);
    postings_clean(postings);
    for (uint32_t i = 0; i < LEFT * STRIDE; i++) {
        numbers[i] = 9 * i;
    }
    assert_int_equal(postings_replace(postings, WORD, numbers, LEFT), 0);
    assert_int_equal(postings_count(postings, WORD), LEFT);
    assert_memory_equal(chunk_of(postings, WORD, 0)->numbers, numbers,
                        POSTINGS_CHUNK * STRIDE * sizeof *numbers);
    assert_memory_equal(chunk_of(postings, WORD, 1)->numbers, numbers + POSTINGS_CHUNK * STRIDE,
                        STRIDE * sizeof *numbers);
    const struct told expected[] = {{WORD, 0, 160}, {WORD, 1, 1}};
    assert_changed(postings, expected, 2);
    const struct postings_cut *cuts = postings_cuts(postings, &cut_count);
    assert_int_equal(cut_count, 1);
    assert_int_equal(cuts->word, WORD);
    assert_int_equal(cuts->from, 2);
    assert_int_equal(cuts->until, 4);
}

static void what_was_cut_is_told_until_it_is_stored(void **state)
{
    struct postings *postings = *state;
    const uint32_t numbers[STRIDE] = {1, 1};
    size_t cut_count = 0;
    append(postings, POSTINGS_CHUNK + 1);
    assert_int_equal(postings_replace(postings, WORD, numbers, 1), 0);
    (void)postings_cuts(postings, &cut_count);
    assert_int_equal(cut_count, 1);
    postings_clean(postings);
    (void)postings_cuts(postings, &cut_count);
    assert_int_equal(cut_count, 0);
    append(postings, POSTINGS_CHUNK); /* it grows again from where it was cut */
    assert_int_equal(chunks_of(postings, WORD), 2);
    assert_int_equal(postings_count(postings, WORD), POSTINGS_CHUNK + 1);
}

/* --- on the way to the store --------------------------------------------------------------------
 */

static void what_is_sealed_is_told_until_it_is_stored(void **state)
{
    struct postings *postings = *state;
    append_to(postings, 20, 1);
    assert_int_equal(postings_seal(postings), 0);
    append_to(postings, 40, 2);
    const struct told both[] = {{20, 0, 1}, {40, 0, 2}};
    assert_changed(postings, both, 2);
    postings_stored(postings);
    assert_changed(postings, both + 1, 1);
}

static void what_changes_while_it_is_stored_is_still_to_be_stored(void **state)
{
    struct postings *postings = *state;
    append_to(postings, 20, 1);
    append_to(postings, 40, 1);
    assert_int_equal(postings_seal(postings), 0);
    append_to(postings, 20, 1);
    postings_stored(postings);
    const struct told expected[] = {{20, 0, 2}};
    assert_changed(postings, expected, 1);
}

/* A place that was given back and taken again stands for another chunk. */
static void what_is_dropped_while_it_is_stored_leaves_its_place_to_others(void **state)
{
    struct postings *postings = *state;
    append_to(postings, 20, 1);
    assert_int_equal(postings_seal(postings), 0);
    (void)postings_drop(postings, 20);
    append_to(postings, 40, 3);
    const struct told expected[] = {{40, 0, 3}};
    assert_changed(postings, expected, 1);
    postings_stored(postings);
    assert_changed(postings, expected, 1);
}

static void what_did_not_arrive_is_sealed_once_more_with_what_came_since(void **state)
{
    struct postings *postings = *state;
    append_to(postings, 20, 1);
    assert_int_equal(postings_seal(postings), 0);
    append_to(postings, 20, 1);
    append_to(postings, 40, 1);
    assert_int_equal(postings_seal(postings), 0);
    const struct told both[] = {{20, 0, 2}, {40, 0, 1}};
    assert_changed(postings, both, 2);
    postings_stored(postings);
    assert_changed(postings, NULL, 0);
}

static void what_is_sealed_is_not_let_go_of(void **state)
{
    struct postings *postings = *state;
    append_to(postings, 20, 1);
    assert_int_equal(postings_seal(postings), 0);
    postings_trim(postings, 0);
    assert_int_equal(postings_count(postings, 20), 1);
    postings_stored(postings);
    postings_trim(postings, 0);
    assert_int_equal(postings_count(postings, 20), 0);
}

static size_t cut_count(const struct postings *postings)
{
    size_t count = 0;
    (void)postings_cuts(postings, &count);
    return count;
}

/* Its first cut is stored while the second, of all that is left, is not: what the store has of it
 * still must not be looked for. */
static void a_word_cut_again_while_it_is_stored_stays_known_to_be_empty(void **state)
{
    struct postings *postings = *state;
    const uint32_t numbers[STRIDE] = {1, 1};
    append(postings, POSTINGS_CHUNK + 1);
    postings_clean(postings);
    assert_int_equal(postings_replace(postings, WORD, numbers, 1), 0);
    assert_int_equal(postings_seal(postings), 0);
    assert_int_equal(postings_replace(postings, WORD, numbers, 0), 0);
    postings_stored(postings);
    struct postings_walk walk;
    postings_walk_begin(postings, NULL, WORD, &walk);
    assert_int_equal(walk.chunk_count, 0);
    assert_int_equal(cut_count(postings), 2);
    assert_int_equal(postings_seal(postings), 0);
    postings_stored(postings);
    assert_int_equal(cut_count(postings), 0);
}

/* --- size ---------------------------------------------------------------------------------------
 */

/* Two numbers of four bytes each: 500·8; at most half as much again is room, besides four
 * chunks' own. */
static void the_blocks_have_room_for_all_that_is_in_them(void **state)
{
    struct postings *postings = *state;
    append_to(postings, 1, 1); /* the index has its first slots */
    uint64_t bytes = postings_bytes(postings);
    append(postings, 500);
    assert_true(postings_bytes(postings) - bytes >= 4000);
    assert_true(postings_bytes(postings) - bytes <= 8000);
}

static void dropped_postings_are_gone_and_the_word_may_be_used_again(void **state)
{
    struct postings *postings = *state;
    append_to(postings, 1, 1);
    uint64_t bytes = postings_bytes(postings);
    append(postings, 10);
    assert_int_equal(postings_drop(postings, WORD), 10);
    assert_int_equal(chunks_of(postings, WORD), 0);
    assert_int_equal(postings_drop(postings, WORD), 0);
    assert_true(postings_bytes(postings) < bytes + 10 * STRIDE * sizeof(uint32_t));
    append(postings, 1);
    assert_int_equal(postings_count(postings, WORD), 1);
    assert_int_equal(postings_count(postings, 1), 1);
}

int main(void)
{
#define postings_test(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)
    const struct CMUnitTest tests[] = {
        postings_test(a_word_without_postings_has_no_chunk),
        postings_test(postings_keep_their_order_and_their_numbers),
        postings_test(a_posting_has_a_cell_for_each_lane),
        postings_test(a_chunk_holds_one_hundred_and_sixty),
        postings_test(words_do_not_mix),
        postings_test(an_append_marks_its_own_chunk_alone),
        postings_test(a_touch_marks_a_chunk_once),
        postings_test(marks_outlive_a_larger_block),
        postings_test(nothing_that_has_changed_is_an_empty_list),
        postings_test(what_has_changed_is_told_by_rising_word_and_number),
        postings_test(a_place_that_was_dropped_and_taken_again_is_told_once),
        postings_test(what_was_dropped_is_not_told),
        postings_test(a_word_without_postings_has_none_to_replace),
        postings_test(fewer_postings_take_fewer_chunks_and_the_rest_is_cut),
        postings_test(what_was_cut_is_told_until_it_is_stored),
        postings_test(what_is_sealed_is_told_until_it_is_stored),
        postings_test(what_changes_while_it_is_stored_is_still_to_be_stored),
        postings_test(what_is_dropped_while_it_is_stored_leaves_its_place_to_others),
        postings_test(what_did_not_arrive_is_sealed_once_more_with_what_came_since),
        postings_test(what_is_sealed_is_not_let_go_of),
        postings_test(a_word_cut_again_while_it_is_stored_stays_known_to_be_empty),
        postings_test(the_blocks_have_room_for_all_that_is_in_them),
        postings_test(dropped_postings_are_gone_and_the_word_may_be_used_again),
    };
    return cmocka_run_group_tests_name("postings", tests, NULL, NULL);
}
