/* Postings over a base: read from it, let go of, read again; and a base that is damaged. */
#include "daemon/learner/postings.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "tests/unit/fake_base.h"
#include "tests/unit/near.h"
#include "tests/unit/postings_look.h"
#include "tests/unit/repeatable.h"

enum {
    LANES = 2,
    STRIDE = 1 + LANES,
    WORD = 7,
    TAGS = 100000
};

struct kept {
    struct postings *postings;
    struct fake_chunks stored;
};

static int set_up(void **state)
{
    static struct kept kept;
    *state = &kept;
    fake_chunks_init(&kept.stored);
    if (postings_new(LANES, &kept.postings) < 0) {
        return -1;
    }
    postings_limit_tags(kept.postings, TAGS);
    return 0;
}

static int tear_down(void **state)
{
    struct kept *kept = *state;
    postings_free(kept->postings);
    fake_chunks_deinit(&kept->stored);
    return 0;
}

static void admit(const struct kept *kept, uint32_t word)
{
    assert_int_equal(postings_admit(kept->postings, &kept->stored.base, word), 0);
}

/* The n-th posting of a word: tag n, and cells that no other has. */
static void fill(uint32_t word, uint32_t tag, uint32_t *ret_posting)
{
    ret_posting[0] = tag;
    ret_posting[1] = word * 1000 + tag + 1;
    ret_posting[2] = word * 1000 + tag + 2;
}

static void append(const struct kept *kept, uint32_t word, uint32_t count)
{
    admit(kept, word);
    for (uint32_t i = 0; i < count; i++) {
        uint32_t place = 0;
        uint32_t at = 0;
        uint32_t tag = (uint32_t)postings_count(kept->postings, word);
        assert_int_equal(postings_append(kept->postings, word, tag, &place, &at), 0);
        fill(word, tag, postings_at(kept->postings, place)->numbers + (size_t)at * STRIDE);
    }
}

/* Stores what has changed. */
static void store(struct kept *kept)
{
    uint32_t *places = NULL;
    size_t count = 0;
    assert_int_equal(postings_changed(kept->postings, &places, &count), 0);
    for (size_t i = 0; i < count; i++) {
        const struct chunk *chunk = postings_at(kept->postings, places[i]);
        fake_chunks_put(&kept->stored, chunk->word, chunk->number, chunk->numbers,
                        chunk->count * STRIDE * sizeof *chunk->numbers);
    }
    free(places);
    postings_clean(kept->postings);
}

/* Walks a word; how many postings it has, each of them as it was appended. */
static size_t walk_through(const struct kept *kept, uint32_t word)
{
    struct postings_walk walk;
    const uint32_t *numbers = NULL;
    size_t count = 0;
    uint32_t seen = 0;
    int result = 0;
    postings_walk_begin(kept->postings, &kept->stored.base, word, &walk);
    while ((result = postings_walk_next(&walk, &numbers, &count)) == 0) {
        for (size_t j = 0; j < count; j++, seen++) {
            uint32_t expected[STRIDE];
            fill(word, seen, expected);
            assert_memory_equal(numbers + j * STRIDE, expected, sizeof expected);
        }
    }
    assert_int_equal(result, -ENOENT);
    return seen;
}

/* What the first step that is not a chunk gives. */
static int end_of_walk(const struct kept *kept, uint32_t word)
{
    struct postings_walk walk;
    const uint32_t *numbers = NULL;
    size_t count = 0;
    int result = 0;
    postings_walk_begin(kept->postings, &kept->stored.base, word, &walk);
    while (result == 0) {
        result = postings_walk_next(&walk, &numbers, &count);
    }
    return result;
}

/* --- reading ------------------------------------------------------------------------------------
 */

static void a_word_that_is_only_stored_is_walked_and_takes_no_memory(void **state)
{
    struct kept *kept = *state;
    append(kept, WORD, 400);
    store(kept);
    postings_trim(kept->postings, 0);
    uint64_t bytes = postings_bytes(kept->postings);
    assert_int_equal(walk_through(kept, WORD), 400);
    assert_int_equal(postings_bytes(kept->postings), bytes);
    assert_int_equal(chunks_of(kept->postings, WORD), 0);
}

static void a_word_in_memory_is_walked_without_the_base(void **state)
{
    struct kept *kept = *state;
    append(kept, WORD, 400);
    store(kept);
    size_t reads = kept->stored.reads;
    kept->stored.error = -EIO;
    assert_int_equal(walk_through(kept, WORD), 400);
    assert_int_equal(kept->stored.reads, reads);
}

/* Of four chunks the last one has changed, so that it stays. */
static void a_word_partly_in_memory_is_walked_through_both(void **state)
{
    struct kept *kept = *state;
    append(kept, WORD, 3 * POSTINGS_CHUNK + 1);
    store(kept);
    append(kept, WORD, 1);
    postings_trim(kept->postings, 0);
    assert_int_equal(chunks_of(kept->postings, WORD), 4);
    size_t reads = kept->stored.reads;
    assert_int_equal(walk_through(kept, WORD), 3 * POSTINGS_CHUNK + 2);
    assert_int_equal(kept->stored.reads - reads, 3);
    admit(kept, WORD);
    kept->stored.error = -EIO;
    assert_int_equal(walk_through(kept, WORD), 3 * POSTINGS_CHUNK + 2);
}

static void what_is_in_memory_is_newer_than_the_base(void **state)
{
    struct kept *kept = *state;
    append(kept, WORD, 1);
    store(kept);
    uint32_t place = place_of(kept->postings, WORD, 0);
    assert_int_equal(postings_touch(kept->postings, place), 0);
    postings_at(kept->postings, place)->numbers[1] = 99;
    postings_trim(kept->postings, 0);
    struct postings_walk walk;
    const uint32_t *numbers = NULL;
    size_t count = 0;
    postings_walk_begin(kept->postings, &kept->stored.base, WORD, &walk);
    assert_int_equal(postings_walk_next(&walk, &numbers, &count), 0);
    assert_int_equal(numbers[1], 99);
}

static void an_admitted_word_can_be_appended_to(void **state)
{
    struct kept *kept = *state;
    append(kept, WORD, POSTINGS_CHUNK + 3);
    store(kept);
    postings_trim(kept->postings, 0);
    append(kept, WORD, 2 * POSTINGS_CHUNK);
    assert_int_equal(walk_through(kept, WORD), 3 * POSTINGS_CHUNK + 3);
    assert_int_equal(postings_changed_count(kept->postings), 3); /* the first is as it was */
    assert_false(postings_at(kept->postings, place_of(kept->postings, WORD, 0))->is_changed);
}

/* --- letting go ---------------------------------------------------------------------------------
 */

static void what_has_changed_is_never_let_go_of(void **state)
{
    struct kept *kept = *state;
    append(kept, WORD, 400);
    append(kept, WORD + 1, 5);
    postings_trim(kept->postings, 0);
    assert_int_equal(postings_changed_count(kept->postings), 4);
    assert_int_equal(walk_through(kept, WORD), 400);
    assert_int_equal(walk_through(kept, WORD + 1), 5);
}

static void with_room_enough_nothing_is_let_go_of(void **state)
{
    struct kept *kept = *state;
    append(kept, WORD, 400);
    store(kept);
    uint64_t bytes = postings_bytes(kept->postings);
    postings_trim(kept->postings, bytes);
    assert_int_equal(postings_bytes(kept->postings), bytes);
    assert_int_equal(chunks_of(kept->postings, WORD), 3);
}

static void no_more_is_let_go_of_than_is_asked_for(void **state)
{
    struct kept *kept = *state;
    for (uint32_t word = 0; word < 50; word++) {
        append(kept, word, POSTINGS_CHUNK);
    }
    store(kept);
    uint64_t bytes = postings_bytes(kept->postings);
    uint64_t chunk_bytes = POSTINGS_CHUNK * STRIDE * sizeof(uint32_t);
    postings_trim(kept->postings, bytes - 10 * chunk_bytes);
    assert_true(postings_bytes(kept->postings) <= bytes - 10 * chunk_bytes);
    assert_true(postings_bytes(kept->postings) > bytes - 12 * chunk_bytes);
}

/* The hand comes by once and finds all used; what is admitted from then on gets another round. */
static void what_was_admitted_lately_stays_longest(void **state)
{
    struct kept *kept = *state;
    for (uint32_t word = 0; word < 50; word++) {
        append(kept, word, POSTINGS_CHUNK);
    }
    store(kept);
    postings_trim(kept->postings, postings_bytes(kept->postings) - 1);
    admit(kept, 20);
    admit(kept, 30);
    postings_trim(kept->postings,
                  postings_bytes(kept->postings) - 45 * POSTINGS_CHUNK * STRIDE * sizeof(uint32_t));
    assert_int_equal(chunks_of(kept->postings, 20), 1);
    assert_int_equal(chunks_of(kept->postings, 30), 1);
}

/* Eighty words, trimmed and stored at any moment, and forgotten: each word is what it should be,
 * and what is not stored is in memory. */
static void whatever_is_let_go_of_every_word_is_whole(void **state)
{
    enum {
        WORDS = 80
    };
    struct kept *kept = *state;
    struct repeatable random = {91};
    size_t counts[WORDS] = {0};
    size_t from_base = 0;
    for (int i = 0; i < 4000; i++) {
        uint32_t word = repeatable_below(&random, WORDS);
        uint32_t chance = repeatable_below(&random, 100);
        if (chance < 50) {
            uint32_t more = repeatable_below(&random, 30);
            append(kept, word, more);
            counts[word] += more;
        } else if (chance < 52) {
            admit(kept, word);
            assert_int_equal(postings_drop(kept->postings, word), counts[word]);
            fake_chunks_forget_word(&kept->stored, word);
            counts[word] = 0;
        } else if (chance < 58) {
            store(kept);
        } else if (chance < 70) {
            postings_trim(kept->postings, repeatable_below(&random, 200000));
        }
        size_t reads = kept->stored.reads;
        assert_int_equal(walk_through(kept, word), counts[word]);
        from_base += kept->stored.reads > reads && counts[word] > 0;
    }
    assert_true(from_base > 100);
}

/* --- damaged ------------------------------------------------------------------------------------
 */

static void assert_damaged(const struct kept *kept, uint32_t word)
{
    assert_int_equal(end_of_walk(kept, word), -EIO);
    assert_int_equal(postings_admit(kept->postings, &kept->stored.base, word), -EIO);
}

static void put_zeros(struct kept *kept, size_t size)
{
    static const unsigned char zeros[4096];
    assert_true(size <= sizeof zeros);
    fake_chunks_put(&kept->stored, WORD, 0, zeros, size);
}

static void bytes_that_are_no_whole_number_of_postings_are_damaged(void **state)
{
    struct kept *kept = *state;
    const size_t sizes[] = {0, 1, STRIDE * 4 - 1, STRIDE * 4 + 1, STRIDE * 4 + 4, STRIDE * 4 + 8};
    for (size_t i = 0; i < sizeof sizes / sizeof *sizes; i++) {
        put_zeros(kept, sizes[i]);
        assert_damaged(kept, WORD);
    }
    put_zeros(kept, (size_t)STRIDE * 4);
    admit(kept, WORD);
}

static void more_postings_than_a_chunk_holds_are_damaged(void **state)
{
    struct kept *kept = *state;
    put_zeros(kept, (size_t)STRIDE * 4 * (POSTINGS_CHUNK + 1));
    assert_damaged(kept, WORD);
    put_zeros(kept, (size_t)STRIDE * 4 * POSTINGS_CHUNK);
    admit(kept, WORD);
    assert_int_equal(postings_count(kept->postings, WORD), POSTINGS_CHUNK);
}

static void a_tag_at_the_limit_is_damaged(void **state)
{
    struct kept *kept = *state;
    const uint32_t numbers[] = {5, 1, 1, TAGS, 1, 1};
    fake_chunks_put(&kept->stored, WORD, 0, numbers, sizeof numbers);
    assert_damaged(kept, WORD);
    postings_limit_tags(kept->postings, TAGS + 1);
    admit(kept, WORD);
    assert_int_equal(postings_count(kept->postings, WORD), 2);
}

/* The word is known by its last chunk, which has changed. */
static void a_gap_among_a_known_word_s_chunks_is_damage(void **state)
{
    struct kept *kept = *state;
    append(kept, WORD, 3 * POSTINGS_CHUNK + 1);
    store(kept);
    append(kept, WORD, 1);
    postings_trim(kept->postings, 0);
    fake_chunks_cut(&kept->stored, WORD, 1, 1);
    assert_damaged(kept, WORD);
    assert_damaged(kept, WORD); /* not only the first time */
}

/* What comes before the damage is no whole word. */
static void a_word_that_was_not_read_to_its_end_is_not_known(void **state)
{
    struct kept *kept = *state;
    append(kept, WORD, 2 * POSTINGS_CHUNK + 1);
    store(kept);
    postings_trim(kept->postings, 0);
    fake_chunks_put(&kept->stored, WORD, 1, "damaged", 7);
    assert_damaged(kept, WORD);
    assert_damaged(kept, WORD); /* not only the first time */
}

/* What was stored of it is still in the base. */
static void a_word_that_lost_all_its_postings_has_none_before_it_is_stored_either(void **state)
{
    struct kept *kept = *state;
    append(kept, WORD, POSTINGS_CHUNK + 1);
    store(kept);
    admit(kept, WORD);
    assert_int_equal(postings_replace(kept->postings, WORD, NULL, 0), 0);
    postings_trim(kept->postings, 0);
    assert_int_equal(walk_through(kept, WORD), 0);
    admit(kept, WORD);
    assert_int_equal(postings_count(kept->postings, WORD), 0);
}

static void an_error_of_the_base_is_handed_on(void **state)
{
    struct kept *kept = *state;
    append(kept, WORD, 1);
    store(kept);
    postings_trim(kept->postings, 0);
    kept->stored.error = -ENOMEM;
    assert_int_equal(end_of_walk(kept, WORD), -ENOMEM);
    assert_int_equal(postings_admit(kept->postings, &kept->stored.base, WORD), -ENOMEM);
    kept->stored.error = -EIO;
    assert_damaged(kept, WORD);
    kept->stored.error = 0;
    assert_int_equal(walk_through(kept, WORD), 1);
}

int main(void)
{
#define base_test(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)
    const struct CMUnitTest tests[] = {
        base_test(a_word_that_is_only_stored_is_walked_and_takes_no_memory),
        base_test(a_word_in_memory_is_walked_without_the_base),
        base_test(a_word_partly_in_memory_is_walked_through_both),
        base_test(what_is_in_memory_is_newer_than_the_base),
        base_test(an_admitted_word_can_be_appended_to),
        base_test(what_has_changed_is_never_let_go_of),
        base_test(with_room_enough_nothing_is_let_go_of),
        base_test(no_more_is_let_go_of_than_is_asked_for),
        base_test(what_was_admitted_lately_stays_longest),
        base_test(whatever_is_let_go_of_every_word_is_whole),
        base_test(bytes_that_are_no_whole_number_of_postings_are_damaged),
        base_test(more_postings_than_a_chunk_holds_are_damaged),
        base_test(a_tag_at_the_limit_is_damaged),
        base_test(a_gap_among_a_known_word_s_chunks_is_damage),
        base_test(a_word_that_was_not_read_to_its_end_is_not_known),
        base_test(a_word_that_lost_all_its_postings_has_none_before_it_is_stored_either),
        base_test(an_error_of_the_base_is_handed_on),
    };
    return cmocka_run_group_tests_name("postings over a base", tests, NULL, NULL);
}
