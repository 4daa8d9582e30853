/* Stored chunks: what has changed of one is stored as news of it, until its turn to be settled. */
#include "storage/model_chunks.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "storage/model_store_private.h"
#include "storage/model_view.h"
#include "tests/unit/store_fixture.h"

enum {
    NUMBERS = 300, /* in a large chunk */
    WORDS = 4000,
    CHANGED = 400, /* of them, in each writing */
    WRITINGS = 60,
    OTHERS = 40, /* words that have a chunk and never change */
    FIRST_OTHER = 100000
};

/* --- fixture: a store of other words' chunks, so that those of a test are few; and what has been
 * put into it of words that have a chunk each --- */

struct chunked {
    char home[FIXTURE_PATH_BYTES];
    struct model_store *store;
    struct model_store_writing *writing;
    struct store_error error;
    unsigned short seed[3];
    uint32_t numbers[WORDS][NUMBERS];
};

static void put_others(struct chunked *chunked);

static int set_up(void **state)
{
    struct chunked *chunked = calloc(1, sizeof *chunked);
    assert_non_null(chunked);
    home_make(chunked->home);
    const struct store_settings settings = {.home = chunked->home, .map_bytes = FIXTURE_MAP_BYTES};
    assert_int_equal(model_store_open(&settings, &chunked->store, &chunked->error), STORE_OK);
    put_others(chunked);
    *state = chunked;
    return 0;
}

static int tear_down(void **state)
{
    struct chunked *chunked = *state;
    model_store_close(chunked->store);
    home_remove(chunked->home);
    free(chunked);
    return 0;
}

static struct model_store_writing *writing_of(struct chunked *chunked)
{
    if (!chunked->writing) {
        assert_int_equal(model_store_begin(chunked->store, &chunked->writing, &chunked->error),
                         STORE_OK);
    }
    return chunked->writing;
}

static void commit(struct chunked *chunked)
{
    assert_int_equal(model_store_commit(writing_of(chunked), &chunked->error), STORE_OK);
    chunked->writing = NULL;
}

static void put_list(struct chunked *chunked, uint32_t word, uint32_t number,
                     const uint32_t *numbers, size_t count)
{
    const struct model_store_chunk chunk = {
        .word = word, .number = number, .bytes = kv_bytes_of(numbers, count * sizeof *numbers)};
    assert_int_equal(model_store_put_chunk(writing_of(chunked), &chunk, &chunked->error), STORE_OK);
}

#define PUT(chunked, word, number, ...)                                                            \
    put_list((chunked), (word), (number), (const uint32_t[]){__VA_ARGS__},                         \
             sizeof((const uint32_t[]){__VA_ARGS__}) / sizeof(uint32_t))

static void put_others(struct chunked *chunked)
{
    for (uint32_t word = FIRST_OTHER; word < FIRST_OTHER + OTHERS; word++) {
        PUT(chunked, word, 0, word);
    }
    commit(chunked);
}

static uint64_t count_of(struct chunked *chunked, enum model_table table)
{
    struct kv_txn *txn = NULL;
    uint64_t count = 0;
    assert_int_equal(kv_begin(chunked->store->kv, false, &txn, &chunked->error), STORE_OK);
    assert_int_equal(kv_count(txn, table, &count, &chunked->error), STORE_OK);
    kv_abort(txn);
    return count;
}

static uint64_t pages_of(struct chunked *chunked, enum model_table table)
{
    struct kv_txn *txn = NULL;
    uint64_t count = 0;
    assert_int_equal(kv_begin(chunked->store->kv, false, &txn, &chunked->error), STORE_OK);
    assert_int_equal(kv_count_pages(txn, table, &count, &chunked->error), STORE_OK);
    kv_abort(txn);
    return count;
}

static struct model_view *look(struct chunked *chunked)
{
    struct model_view *view = NULL;
    assert_int_equal(model_view_open(chunked->store, &view, &chunked->error), STORE_OK);
    return view;
}

static void assert_list(struct chunked *chunked, struct model_view *view, uint32_t word,
                        uint32_t number, const uint32_t *numbers, size_t count)
{
    struct kv_bytes bytes = {0};
    assert_int_equal(model_view_chunk(view, word, number, &bytes, &chunked->error), STORE_OK);
    assert_int_equal(bytes.size, count * sizeof *numbers);
    assert_memory_equal(bytes.data, numbers, bytes.size);
}

#define ASSERT_IS(chunked, view, word, number, ...)                                                \
    assert_list((chunked), (view), (word), (number), (const uint32_t[]){__VA_ARGS__},              \
                sizeof((const uint32_t[]){__VA_ARGS__}) / sizeof(uint32_t))

/* What is stored now, without what waits in the writing. */
#define ASSERT_HOLDS(chunked, word, number, ...)                                                   \
    do {                                                                                           \
        struct model_view *now = look(chunked);                                                    \
        ASSERT_IS((chunked), now, (word), (number), __VA_ARGS__);                                  \
        model_view_close(now);                                                                     \
    } while (0)

/* --- one chunk --- */

static void a_new_chunk_is_no_news(void **state)
{
    struct chunked *chunked = *state;
    PUT(chunked, 5, 0, 1, 2, 3, 4);
    commit(chunked);
    ASSERT_HOLDS(chunked, 5, 0, 1, 2, 3, 4);
    assert_int_equal(count_of(chunked, MODEL_NEWS), 0);
}

static void what_changes_of_a_chunk_is_news(void **state)
{
    struct chunked *chunked = *state;
    PUT(chunked, 5, 0, 1, 2, 3, 4);
    commit(chunked);
    PUT(chunked, 5, 0, 1, 2, 9, 4);
    commit(chunked);
    ASSERT_HOLDS(chunked, 5, 0, 1, 2, 9, 4);
    assert_int_equal(count_of(chunked, MODEL_NEWS), 1);
    assert_int_equal(count_of(chunked, MODEL_CHUNKS), OTHERS + 1);
}

static void a_chunk_has_one_piece_of_news_however_often_it_changes(void **state)
{
    struct chunked *chunked = *state;
    PUT(chunked, 5, 0, 1, 2, 3, 4);
    commit(chunked);
    PUT(chunked, 5, 0, 1, 2, 9, 4);
    commit(chunked);
    PUT(chunked, 5, 0, 8, 2, 3, 4);
    commit(chunked);
    ASSERT_HOLDS(chunked, 5, 0, 8, 2, 3, 4);
    assert_int_equal(count_of(chunked, MODEL_NEWS), 1);
}

static void a_chunk_grows_and_shrinks_by_news(void **state)
{
    struct chunked *chunked = *state;
    PUT(chunked, 5, 0, 1, 2, 3, 4);
    commit(chunked);
    PUT(chunked, 5, 0, 1, 2, 3, 4, 5);
    commit(chunked);
    ASSERT_HOLDS(chunked, 5, 0, 1, 2, 3, 4, 5);
    PUT(chunked, 5, 0, 1, 2);
    commit(chunked);
    ASSERT_HOLDS(chunked, 5, 0, 1, 2);
    assert_int_equal(count_of(chunked, MODEL_NEWS), 1);
}

/* Four numbers and what says where they are take more than the four alone. */
static void a_chunk_that_has_changed_all_over_is_stored_whole(void **state)
{
    struct chunked *chunked = *state;
    PUT(chunked, 5, 0, 1, 2, 3, 4);
    commit(chunked);
    PUT(chunked, 5, 0, 1, 2, 9, 4);
    commit(chunked);
    PUT(chunked, 5, 0, 6, 7, 8, 9);
    commit(chunked);
    ASSERT_HOLDS(chunked, 5, 0, 6, 7, 8, 9);
    assert_int_equal(count_of(chunked, MODEL_NEWS), 0);
}

/* Six of 41 are more than an eighth of them, five are not. */
static void where_many_chunks_change_they_are_stored_whole(void **state)
{
    struct chunked *chunked = *state;
    PUT(chunked, 5, 0, 1, 2, 3, 4);
    commit(chunked);
    for (uint32_t count = 5; count <= 6; count++) {
        for (uint32_t i = 1; i < count; i++) {
            PUT(chunked, FIRST_OTHER + i, 0, FIRST_OTHER + i);
        }
        PUT(chunked, 5, 0, 1, 2, 9, count);
        commit(chunked);
        ASSERT_HOLDS(chunked, 5, 0, 1, 2, 9, count);
        assert_int_equal(count_of(chunked, MODEL_NEWS), count == 5 ? 5 : 0);
    }
}

static void a_view_goes_on_seeing_what_was_news_when_it_was_opened(void **state)
{
    struct chunked *chunked = *state;
    PUT(chunked, 5, 0, 1, 2, 3, 4);
    commit(chunked);
    struct model_view *before = look(chunked);
    PUT(chunked, 5, 0, 1, 2, 9, 4);
    commit(chunked);
    ASSERT_IS(chunked, before, 5, 0, 1, 2, 3, 4);
    model_view_close(before);
}

/* --- a word's chunks --- */

/* Chunks 0 to 3, of which the second and the last have news. */
static void put_four(struct chunked *chunked)
{
    for (uint32_t number = 0; number < 4; number++) {
        PUT(chunked, 5, number, number, 2, 3, 4);
    }
    PUT(chunked, 6, 0, 1, 2, 3, 4);
    commit(chunked);
    PUT(chunked, 5, 1, 1, 2, 9, 4);
    PUT(chunked, 5, 3, 3, 2, 8, 4);
    PUT(chunked, 6, 0, 1, 2, 7, 4);
    commit(chunked);
}

static void a_words_chunks_are_read_in_their_order_with_news_and_without(void **state)
{
    struct chunked *chunked = *state;
    struct kv_bytes bytes;
    put_four(chunked);
    struct model_view *view = look(chunked);
    ASSERT_IS(chunked, view, 5, 0, 0, 2, 3, 4);
    ASSERT_IS(chunked, view, 5, 1, 1, 2, 9, 4);
    ASSERT_IS(chunked, view, 5, 2, 2, 2, 3, 4);
    ASSERT_IS(chunked, view, 5, 3, 3, 2, 8, 4);
    assert_int_equal(model_view_chunk(view, 5, 4, &bytes, &chunked->error), STORE_NOT_FOUND);
    model_view_close(view);
}

static void a_words_chunks_are_read_in_any_order_with_news_and_without(void **state)
{
    struct chunked *chunked = *state;
    put_four(chunked);
    struct model_view *view = look(chunked);
    ASSERT_IS(chunked, view, 5, 3, 3, 2, 8, 4);
    ASSERT_IS(chunked, view, 5, 0, 0, 2, 3, 4);
    ASSERT_IS(chunked, view, 5, 2, 2, 2, 3, 4);
    ASSERT_IS(chunked, view, 6, 0, 1, 2, 7, 4);
    ASSERT_IS(chunked, view, 5, 1, 1, 2, 9, 4);
    ASSERT_IS(chunked, view, 5, 2, 2, 2, 3, 4);
    model_view_close(view);
}

static void a_chunk_that_is_removed_leaves_no_news(void **state)
{
    struct chunked *chunked = *state;
    put_four(chunked);
    assert_int_equal(model_store_remove_chunk(writing_of(chunked), 5, 3, &chunked->error),
                     STORE_OK);
    commit(chunked);
    assert_int_equal(count_of(chunked, MODEL_NEWS), 2);
    PUT(chunked, 5, 3, 7, 7, 7, 7);
    commit(chunked);
    ASSERT_HOLDS(chunked, 5, 3, 7, 7, 7, 7);
}

static void a_word_that_is_forgotten_leaves_no_news(void **state)
{
    struct chunked *chunked = *state;
    const struct model_store_word fog = {.term = "fog", .term_bytes = 3, .number = 5};
    put_four(chunked);
    assert_int_equal(model_store_forget_word(writing_of(chunked), &fog, &chunked->error), STORE_OK);
    commit(chunked);
    assert_int_equal(count_of(chunked, MODEL_NEWS), 1);
    assert_int_equal(count_of(chunked, MODEL_CHUNKS), OTHERS + 1);
    ASSERT_HOLDS(chunked, 6, 0, 1, 2, 7, 4);
}

/* --- settling --- */

static size_t any(struct chunked *chunked, size_t below)
{
    return (size_t)nrand48(chunked->seed) % below;
}

static void put_word(struct chunked *chunked, size_t word)
{
    put_list(chunked, (uint32_t)word, 0, chunked->numbers[word], NUMBERS);
}

/* A tenth of the words at a time, a stretch of a few numbers in each. */
static void change_some(struct chunked *chunked)
{
    for (size_t i = 0; i < CHANGED; i++) {
        size_t word = any(chunked, WORDS);
        size_t first = any(chunked, NUMBERS - 20);
        for (size_t j = 0; j < 20; j++) {
            chunked->numbers[word][first + j]++;
        }
        put_word(chunked, word);
    }
    commit(chunked);
}

static void assert_all_there(struct chunked *chunked)
{
    struct model_view *view = look(chunked);
    for (uint32_t word = 0; word < WORDS; word++) {
        assert_list(chunked, view, word, 0, chunked->numbers[word], NUMBERS);
    }
    model_view_close(view);
}

/* A piece of news has 88 bytes at least: so many that 60 times 400 of them would take 500 pages. */
static void news_keep_to_their_share_and_nothing_is_lost(void **state)
{
    struct chunked *chunked = *state;
    uint64_t most = 0;
    for (size_t word = 0; word < WORDS; word++) {
        put_word(chunked, word);
    }
    commit(chunked);
    uint64_t share = pages_of(chunked, MODEL_CHUNKS) / MODEL_CHUNKS_NEWS_PART;
    for (size_t i = 0; i < WRITINGS; i++) {
        change_some(chunked);
        uint64_t pages = pages_of(chunked, MODEL_NEWS);
        most = pages > most ? pages : most;
    }
    share = share > MODEL_CHUNKS_LEAST_NEWS ? share : MODEL_CHUNKS_LEAST_NEWS;
    assert_in_range(most, share / 2, share);
    assert_all_there(chunked);
}

static void few_news_are_never_settled(void **state)
{
    struct chunked *chunked = *state;
    PUT(chunked, 5, 0, 1, 2, 3, 4);
    commit(chunked);
    for (uint32_t i = 0; i < 10; i++) {
        PUT(chunked, 5, 0, i, 2, 3, 4);
        commit(chunked);
        assert_int_equal(count_of(chunked, MODEL_NEWS), 1);
    }
}

/* Nothing else of these tests stands in that table. */
static void a_large_writing_gathers_free_pages_and_a_small_one_does_not(void **state)
{
    struct chunked *chunked = *state;
    PUT(chunked, 1, 0, 7);
    commit(chunked);
    assert_int_equal(count_of(chunked, MODEL_META), 0);
    for (uint32_t word = 0; word < 5000; word++) {
        PUT(chunked, word, 0, word);
    }
    commit(chunked);
    assert_int_equal(count_of(chunked, MODEL_META), 1);
}

/* --- damage --- */

static void damage(struct chunked *chunked, enum model_table table)
{
    static const unsigned char KEY[MODEL_CHUNKS_KEY] = {0, 0, 0, 5};
    unsigned char changed[KV_VALUE_BYTES];
    struct kv_bytes value = {0};
    struct kv_txn *txn = NULL;
    const struct kv_bytes key = kv_bytes_of(KEY, sizeof KEY);
    assert_int_equal(kv_begin(chunked->store->kv, true, &txn, &chunked->error), STORE_OK);
    assert_int_equal(kv_get(txn, table, key, &value, &chunked->error), STORE_OK);
    memcpy(changed, value.data, value.size);
    changed[value.size - 1] ^= 1U;
    assert_int_equal(kv_put(txn, table, key, kv_bytes_of(changed, value.size), &chunked->error),
                     STORE_OK);
    assert_int_equal(kv_commit(txn, &chunked->error), STORE_OK);
}

static void assert_damaged(struct chunked *chunked)
{
    struct kv_bytes bytes = {0};
    struct model_view *view = look(chunked);
    assert_int_equal(model_view_chunk(view, 5, 0, &bytes, &chunked->error), STORE_CORRUPT);
    assert_string_equal(chunked->error.text, "a stored chunk of the model is damaged");
    model_view_close(view);
}

static void put_news(struct chunked *chunked)
{
    PUT(chunked, 5, 0, 1, 2, 3, 4);
    commit(chunked);
    PUT(chunked, 5, 0, 9, 2, 3, 4);
    commit(chunked);
}

static void damaged_news_are_told(void **state)
{
    put_news(*state);
    damage(*state, MODEL_NEWS);
    assert_damaged(*state);
}

static void damage_of_what_the_news_are_of_is_told(void **state)
{
    put_news(*state);
    damage(*state, MODEL_CHUNKS);
    assert_damaged(*state);
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_new_chunk_is_no_news),
        TEST(what_changes_of_a_chunk_is_news),
        TEST(a_chunk_has_one_piece_of_news_however_often_it_changes),
        TEST(a_chunk_grows_and_shrinks_by_news),
        TEST(a_chunk_that_has_changed_all_over_is_stored_whole),
        TEST(where_many_chunks_change_they_are_stored_whole),
        TEST(a_view_goes_on_seeing_what_was_news_when_it_was_opened),
        TEST(a_words_chunks_are_read_in_their_order_with_news_and_without),
        TEST(a_words_chunks_are_read_in_any_order_with_news_and_without),
        TEST(a_chunk_that_is_removed_leaves_no_news),
        TEST(a_word_that_is_forgotten_leaves_no_news),
        TEST(a_large_writing_gathers_free_pages_and_a_small_one_does_not),
        TEST(news_keep_to_their_share_and_nothing_is_lost),
        TEST(few_news_are_never_settled),
        TEST(damaged_news_are_told),
        TEST(damage_of_what_the_news_are_of_is_told),
    };
    return cmocka_run_group_tests_name("model_chunks", tests, NULL, NULL);
}
