#include "daemon/learner/postings.h"

#include <string.h>

#include "tests/unit/near.h"

static int set_up(void **state)
{
    static struct postings postings;
    memset(&postings, 0, sizeof postings);
    *state = &postings;
    return 0;
}

static int tear_down(void **state)
{
    postings_deinit(*state);
    return 0;
}

/* Posting i: tag 3i, weight i/2, accumulator i/4; all exact. */
static void append(struct postings *postings, uint32_t count)
{
    for (uint32_t i = 0; i < count; i++) {
        assert_int_equal(postings_append(postings, 3 * i, (float)i / 2.0F, (float)i / 4.0F), 0);
    }
}

static void a_word_without_postings_takes_no_memory(void **state)
{
    const struct postings *postings = *state;
    assert_int_equal(postings_bytes(postings), 0);
    assert_int_equal(postings_chunks(postings), 0);
}

static void postings_keep_their_order_and_their_numbers(void **state)
{
    struct postings *postings = *state;
    append(postings, 1000);
    assert_int_equal(postings->count, 1000);
    for (uint32_t i = 0; i < 1000; i++) {
        assert_int_equal(postings->tags[i], 3 * i);
        assert_float_equal(postings->values[i], (float)i / 2.0F, 0.0F);
        assert_float_equal(postings->accumulators[i], (float)i / 4.0F, 0.0F);
    }
}

static void a_chunk_holds_one_hundred_and_sixty(void **state)
{
    struct postings *postings = *state;
    append(postings, 1);
    assert_int_equal(postings_chunks(postings), 1);
    append(postings, 159);
    assert_int_equal(postings_chunks(postings), 1);
    append(postings, 1);
    assert_int_equal(postings_chunks(postings), 2);
}

static void an_append_marks_its_own_chunk_alone(void **state)
{
    struct postings *postings = *state;
    append(postings, 2 * POSTINGS_CHUNK);
    postings->changed[0] = 0;
    postings->changed[1] = 0;
    append(postings, 1);
    assert_int_equal(postings->changed[0], 0);
    assert_int_equal(postings->changed[1], 0);
    assert_int_equal(postings->changed[2], 1);
}

static void marks_outlive_a_larger_block(void **state)
{
    struct postings *postings = *state;
    append(postings, 2 * POSTINGS_CHUNK + 1);
    postings->changed[1] = 0;
    uint64_t bytes = postings_bytes(postings);
    while (postings_bytes(postings) == bytes) {
        append(postings, 1);
    }
    assert_int_equal(postings->changed[0], 1);
    assert_int_equal(postings->changed[1], 0);
    assert_int_equal(postings->changed[2], 1);
}

/* Three numbers of four bytes each, and a mark for every chunk: 500·12 + 4. */
static void the_block_has_room_for_all_that_is_in_it(void **state)
{
    struct postings *postings = *state;
    append(postings, 500);
    assert_true(postings_bytes(postings) >= 6004);
    assert_true(postings_bytes(postings) <= 12000);
}

static void postings_put_away_are_empty_and_may_be_used_again(void **state)
{
    struct postings *postings = *state;
    append(postings, 10);
    postings_deinit(postings);
    assert_int_equal(postings->count, 0);
    assert_int_equal(postings_bytes(postings), 0);
    append(postings, 1);
    assert_int_equal(postings->count, 1);
}

int main(void)
{
#define postings_test(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)
    const struct CMUnitTest tests[] = {
        postings_test(a_word_without_postings_takes_no_memory),
        postings_test(postings_keep_their_order_and_their_numbers),
        postings_test(a_chunk_holds_one_hundred_and_sixty),
        postings_test(an_append_marks_its_own_chunk_alone),
        postings_test(marks_outlive_a_larger_block),
        postings_test(the_block_has_room_for_all_that_is_in_it),
        postings_test(postings_put_away_are_empty_and_may_be_used_again),
    };
    return cmocka_run_group_tests_name("postings", tests, NULL, NULL);
}
