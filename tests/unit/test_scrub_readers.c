/* Readers on threads of their own while the writer files, erases and scrubs. */
#include <pthread.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdatomic.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

enum {
    KEPT = 50,
    READERS = 2,
    ROUNDS = 60
};

static const char kept_text[] = "lamp lit at dusk, wind south west, two ketches";

struct reader {
    struct store *store;
    atomic_bool *is_over;
    pthread_t thread;
    size_t views;
    size_t wrong; /* views in which a kept entry was not as it was filed */
};

static bool all_as_filed(struct store *store, struct item_buffer *buffer)
{
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
        reader->wrong += all_as_filed(reader->store, &buffer) ? 0 : 1;
        reader->views++;
    } while (!atomic_load(reader->is_over));
    item_buffer_deinit(&buffer);
    return NULL;
}

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
    for (size_t i = 0; i < READERS; i++) {
        readers[i].store = fixture->store;
        readers[i].is_over = &is_over;
        assert_int_equal(pthread_create(&readers[i].thread, NULL, read_on, &readers[i]), 0);
    }
    for (int round = 0; round < ROUNDS; round++) {
        erase_one(fixture);
    }
    atomic_store(&is_over, true);
    for (size_t i = 0; i < READERS; i++) {
        assert_int_equal(pthread_join(readers[i].thread, NULL), 0);
        assert_int_equal(readers[i].wrong, 0);
        assert_true(readers[i].views > 0);
    }
    size_t left = 1;
    struct store_error error = {0};
    while (left > 0) {
        assert_int_equal(store_scrub(fixture->store, 16, &left, &error), STORE_OK);
    }
    assert_int_equal(home_occurrences(fixture->home, "store/data.mdb", "asked that this"), 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup_teardown(readers_see_whole_entries_while_pages_are_scrubbed,
                                        fixture_setup, fixture_teardown),
    };
    return cmocka_run_group_tests_name("scrubbing beside readers", tests, NULL, NULL);
}
