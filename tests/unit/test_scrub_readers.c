/* Readers on threads of their own while the writer stores, erases and scrubs: items, the model. */
#include <pthread.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdatomic.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "storage/model_view.h"
#include "tests/unit/store_fixture.h"

enum {
    KEPT = 50,
    READERS = 2,
    ROUNDS = 60
};

static const char kept_text[] = "lamp lit at dusk, wind south west, two ketches";

/* Whether all that is kept is as it was put, in one view. */
typedef bool (*look)(void *store, struct item_buffer *buffer);

struct reader {
    void *store;
    look all_is_there;
    atomic_bool *is_over;
    pthread_t thread;
    size_t views;
    size_t wrong; /* views in which something kept was not as it was put */
};

static bool all_as_filed(void *user, struct item_buffer *buffer)
{
    struct store *store = user;
    struct store_error error = {0};
    struct store_view *view = NULL;
    bool is_right = store_read(store, &view, &error) == STORE_OK;
    for (uint64_t seq = 1; seq <= KEPT && is_right; seq++) {
        struct item_record record;
        is_right = items_read(view, seq, buffer, &record, &error) == STORE_OK &&
                   is_text(record.text, kept_text);
    }
    store_end(view);
    return is_right;
}

static void *read_on(void *argument)
{
    struct reader *reader = argument;
    struct item_buffer buffer = {0};
    do {
        reader->wrong += reader->all_is_there(reader->store, &buffer) ? 0 : 1;
        reader->views++;
    } while (!atomic_load(reader->is_over));
    item_buffer_deinit(&buffer);
    return NULL;
}

static void start_readers(struct reader readers[READERS], void *store, look all_is_there,
                          atomic_bool *is_over)
{
    for (size_t i = 0; i < READERS; i++) {
        readers[i] =
            (struct reader){.store = store, .all_is_there = all_is_there, .is_over = is_over};
        assert_int_equal(pthread_create(&readers[i].thread, NULL, read_on, &readers[i]), 0);
    }
}

static void end_readers(struct reader readers[READERS], atomic_bool *is_over)
{
    atomic_store(is_over, true);
    for (size_t i = 0; i < READERS; i++) {
        assert_int_equal(pthread_join(readers[i].thread, NULL), 0);
        assert_int_equal(readers[i].wrong, 0);
        assert_true(readers[i].views > 0);
    }
}

/* --- items --- */

/* One entry comes, goes and is scrubbed away as far as the readers let it. */
static void erase_one(struct fixture *fixture)
{
    struct store_error error = {0};
    size_t left = 0;
    (void)fixture_file_text(fixture, "passing", "asked that this be left out");
    (void)fixture_erase(fixture, fixture_withdraw(fixture, "passing"));
    for (int calls = 0; calls < 8; calls++) {
        assert_int_equal(store_scrub(fixture->store, 16, &left, &error), STORE_OK);
    }
}

static void readers_see_whole_entries_while_pages_are_scrubbed(void **state)
{
    struct fixture *fixture = *state;
    atomic_bool is_over = false;
    struct reader readers[READERS] = {0};
    for (int i = 0; i < KEPT; i++) {
        char id[32];
        (void)snprintf(id, sizeof id, "log/%d", i);
        (void)fixture_file_text(fixture, id, kept_text);
    }
    start_readers(readers, fixture->store, all_as_filed, &is_over);
    for (int round = 0; round < ROUNDS; round++) {
        erase_one(fixture);
    }
    end_readers(readers, &is_over);
    size_t left = 1;
    struct store_error error = {0};
    while (left > 0) {
        assert_int_equal(store_scrub(fixture->store, 16, &left, &error), STORE_OK);
    }
    assert_int_equal(home_occurrences(fixture->home, "store/data.mdb", "asked that this"), 0);
}

/* --- the model --- */

/* Each kept word and its chunk are of the round that the entry tells. */
static bool all_of_one_round(void *user, struct item_buffer *buffer)
{
    (void)buffer;
    struct model_store *store = user;
    struct store_error error = {0};
    struct model_view *view = NULL;
    struct model_store_entry entry = {0};
    bool is_right = model_view_open(store, &view, &error) == STORE_OK &&
                    model_view_entry(view, 1, &entry, &error) == STORE_OK;
    for (uint32_t number = 0; number < KEPT && is_right; number++) {
        char term[16];
        struct model_store_word word = {0};
        struct kv_bytes chunk = {0};
        int length = snprintf(term, sizeof term, "word%u", number);
        is_right = model_view_word(view, term, (size_t)length, &word, &error) == STORE_OK &&
                   model_view_chunk(view, number, 0, &chunk, &error) == STORE_OK &&
                   word.number == number && word.count == entry.scored &&
                   chunk.size == sizeof entry.scored &&
                   memcmp(chunk.data, &entry.scored, chunk.size) == 0;
    }
    model_view_close(view);
    return is_right;
}

/* All words, chunks and an entry say which round it is; one word comes or goes. */
static void put_round(struct model_store *store, uint64_t round)
{
    struct store_error error = {0};
    struct model_store_writing *writing = NULL;
    const struct model_store_word passing = {
        .term = "schoonerwreckage", .term_bytes = 16, .number = KEPT};
    const struct model_store_entry entry = {.number = 1, .scored = round};
    assert_int_equal(model_store_begin(store, &writing, &error), STORE_OK);
    for (uint32_t number = 0; number < KEPT; number++) {
        char term[16];
        int length = snprintf(term, sizeof term, "word%u", number);
        const struct model_store_word word = {
            .term = term, .term_bytes = (size_t)length, .number = number, .count = (uint32_t)round};
        const struct model_store_chunk chunk = {.word = number,
                                                .bytes = kv_bytes_of(&round, sizeof round)};
        assert_int_equal(model_store_put_word(writing, &word, &error), STORE_OK);
        assert_int_equal(model_store_put_chunk(writing, &chunk, &error), STORE_OK);
    }
    assert_int_equal(model_store_put_entry(writing, &entry, &error), STORE_OK);
    assert_int_equal(round % 2 == 0 ? model_store_put_word(writing, &passing, &error)
                                    : model_store_forget_word(writing, &passing, &error),
                     STORE_OK);
    assert_int_equal(model_store_commit(writing, &error), STORE_OK);
}

static void readers_see_a_model_of_one_moment_while_it_is_stored_and_scrubbed(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    struct model_store *store = NULL;
    atomic_bool is_over = false;
    struct reader readers[READERS] = {0};
    size_t left = 1;
    assert_int_equal(model_store_open(&fixture->settings, &store, &error), STORE_OK);
    put_round(store, 0);
    start_readers(readers, store, all_of_one_round, &is_over);
    for (uint64_t round = 1; round < ROUNDS; round++) {
        put_round(store, round);
        for (int calls = 0; calls < 4; calls++) {
            assert_int_equal(model_store_scrub(store, 16, &left, &error), STORE_OK);
        }
    }
    end_readers(readers, &is_over);
    do {
        assert_int_equal(model_store_scrub(store, 16, &left, &error), STORE_OK);
    } while (left > 0);
    assert_int_equal(home_occurrences(fixture->home, "model/data.mdb", "schoonerwreckage"), 0);
    assert_true(all_of_one_round(store, NULL));
    model_store_close(store);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup_teardown(readers_see_whole_entries_while_pages_are_scrubbed,
                                        fixture_setup, fixture_teardown),
        cmocka_unit_test_setup_teardown(
            readers_see_a_model_of_one_moment_while_it_is_stored_and_scrubbed, fixture_setup,
            fixture_teardown),
    };
    return cmocka_run_group_tests_name("scrubbing beside readers", tests, NULL, NULL);
}
