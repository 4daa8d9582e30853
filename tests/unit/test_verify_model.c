/* What is stored of the model is looked through: what is whole, and damage by its name. */
#include "storage/verify.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "storage/model_store_private.h"
#include "tests/unit/store_fixture.h"

/* --- fixture: the words "fog" and "gale", numbers 0 and 1, each with a chunk of two postings of
 * two numbers, that of "gale" with news; and two tags --- */

struct looked {
    char home[FIXTURE_PATH_BYTES];
    struct model_store *store;
    struct store_error error;
    char faults[1024];
};

static const unsigned char NUMBER_0[] = {0, 0, 0, 0};
static const unsigned char CHUNK_OF_GALE[] = {0, 0, 0, 1, 0, 0, 0, 0};
static const unsigned char CHUNK_OF_NOBODY[] = {0, 0, 0, 9, 0, 0, 0, 0};
#define KEY(bytes) kv_bytes_of((bytes), sizeof(bytes))

static struct kv_txn *begin(struct looked *looked)
{
    struct kv_txn *txn = NULL;
    assert_int_equal(kv_begin(looked->store->kv, true, &txn, &looked->error), STORE_OK);
    return txn;
}

static void commit(struct looked *looked, struct kv_txn *txn)
{
    assert_int_equal(kv_commit(txn, &looked->error), STORE_OK);
}

static void put_model(struct looked *looked)
{
    static const uint32_t chunk[] = {0, 7, 1, 9};
    static const struct model_store_word words[] = {
        {.term = "fog", .term_bytes = 3, .number = 0, .count = 3},
        {.term = "gale", .term_bytes = 4, .number = 1, .count = 2}};
    const struct model_store_head head = {
        .settings = "step = 1", .learned = 5, .words = 2, .next_word = 2, .postings = 4};
    struct model_store_writing *writing = NULL;
    int code = model_store_begin(looked->store, &writing, &looked->error);
    for (uint32_t i = 0; i < 2 && code == STORE_OK; i++) {
        const struct model_store_chunk put = {.word = i, .bytes = KEY(chunk)};
        const struct model_store_tag tag = {.number = i, .count = 3};
        code = model_store_put_word(writing, &words[i], &looked->error);
        code |= model_store_put_chunk(writing, &put, &looked->error);
        code |= model_store_put_tag(writing, &tag, &looked->error);
    }
    code |= model_store_put_head(writing, &head, &looked->error);
    assert_int_equal(code, STORE_OK);
    assert_int_equal(model_store_commit(writing, &looked->error), STORE_OK);
}

static void put_news(struct looked *looked)
{
    static const uint32_t changed[] = {0, 8, 1, 9};
    struct kv_txn *txn = begin(looked);
    assert_int_equal(model_chunks_put(txn, KEY(CHUNK_OF_GALE), KEY(changed), false, &looked->error),
                     STORE_OK);
    commit(looked, txn);
}

static int set_up(void **state)
{
    struct looked *looked = calloc(1, sizeof *looked);
    assert_non_null(looked);
    home_make(looked->home);
    const struct store_settings settings = {.home = looked->home, .map_bytes = FIXTURE_MAP_BYTES};
    assert_int_equal(model_store_open(&settings, &looked->store, &looked->error), STORE_OK);
    put_model(looked);
    put_news(looked);
    *state = looked;
    return 0;
}

static int tear_down(void **state)
{
    struct looked *looked = *state;
    model_store_close(looked->store);
    home_remove(looked->home);
    free(looked);
    return 0;
}

/* --- looking --- */

static void note_fault(void *user, const char *sentence)
{
    struct looked *looked = user;
    size_t used = strlen(looked->faults);
    (void)snprintf(looked->faults + used, sizeof looked->faults - used, "%s; ", sentence);
}

static void assert_faults(struct looked *looked, const char *expected)
{
    static const unsigned char uuid[STORE_UUID_BYTES];
    const struct verify_origin origin = {.store_uuid = uuid, .last_seq = 5, .tags = 2};
    const struct verify_sink sink = {.user = looked, .fault = note_fault};
    struct verify_model_sums sums;
    assert_int_equal(verify_model(looked->store, &origin, &sink, &sums, &looked->error), STORE_OK);
    assert_string_equal(looked->faults, expected);
}

/* Turns the last bit of an entry over. */
static void damage(struct looked *looked, enum model_table table, struct kv_bytes key)
{
    unsigned char changed[KV_VALUE_BYTES];
    struct kv_bytes value = {0};
    struct kv_txn *txn = begin(looked);
    assert_int_equal(kv_get(txn, table, key, &value, &looked->error), STORE_OK);
    memcpy(changed, value.data, value.size);
    changed[value.size - 1] ^= 1U;
    assert_int_equal(kv_put(txn, table, key, kv_bytes_of(changed, value.size), &looked->error),
                     STORE_OK);
    commit(looked, txn);
}

static void change_count(struct looked *looked, uint32_t number, const void *cell)
{
    struct model_cells_changes changes = {.cells = &MODEL_CELLS_COUNTS};
    struct kv_txn *txn = begin(looked);
    assert_int_equal(model_cells_note(&changes, number, cell, &looked->error), STORE_OK);
    assert_int_equal(model_cells_make(&changes, txn, &looked->error), STORE_OK);
    model_cells_deinit(&changes);
    commit(looked, txn);
}

/* --- tests --- */

static void a_model_with_news_is_whole(void **state)
{
    assert_faults(*state, "");
}

static void a_word_without_a_count_is_named(void **state)
{
    change_count(*state, 1, NULL);
    assert_faults(*state, "the word gale has no count; there are 2 words, and counts of 1; ");
}

static void a_count_of_no_word_is_missed_among_the_words(void **state)
{
    change_count(*state, 2, "\3\0\0");
    assert_faults(*state, "there is a count of word number 2, which is not given out yet; ");
}

static void a_damaged_list_of_counts_is_named(void **state)
{
    damage(*state, MODEL_COUNTS, KEY(NUMBER_0));
    assert_faults(*state, "the model's list of counts of numbers 0 to 63 is damaged; "
                          "the word fog has no count; the word gale has no count; "
                          "there are 2 words, and counts of 0; ");
}

static void a_damaged_list_of_tags_is_named(void **state)
{
    damage(*state, MODEL_TAGS, KEY(NUMBER_0));
    assert_faults(*state, "the model's list of tags of numbers 0 to 15 is damaged; ");
}

static void damaged_news_of_a_chunk_are_named(void **state)
{
    damage(*state, MODEL_NEWS, KEY(CHUNK_OF_GALE));
    assert_faults(*state, "chunk 0 of the weights of word number 1 is damaged; "
                          "there are 16 bytes of weights, which 4 do not take; ");
}

/* In the last number, which the news leave as it was. */
static void a_chunk_that_is_damaged_below_its_news_is_named(void **state)
{
    damage(*state, MODEL_CHUNKS, KEY(CHUNK_OF_GALE));
    assert_faults(*state, "chunk 0 of the weights of word number 1 is damaged; "
                          "there are 16 bytes of weights, which 4 do not take; ");
}

static void news_of_no_chunk_are_counted(void **state)
{
    struct looked *looked = *state;
    struct kv_txn *txn = begin(looked);
    assert_int_equal(kv_put(txn, MODEL_NEWS, KEY(CHUNK_OF_NOBODY), KEY(NUMBER_0), &looked->error),
                     STORE_OK);
    commit(looked, txn);
    assert_faults(looked, "news of 1 chunks belong to none; ");
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_model_with_news_is_whole),
        TEST(a_word_without_a_count_is_named),
        TEST(a_count_of_no_word_is_missed_among_the_words),
        TEST(a_damaged_list_of_counts_is_named),
        TEST(a_damaged_list_of_tags_is_named),
        TEST(damaged_news_of_a_chunk_are_named),
        TEST(a_chunk_that_is_damaged_below_its_news_is_named),
        TEST(news_of_no_chunk_are_counted),
    };
    return cmocka_run_group_tests_name("verifying a model", tests, NULL, NULL);
}
