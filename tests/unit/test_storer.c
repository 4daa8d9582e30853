/* The thread that commits the model's writings, and its heart. */
#include "daemon/storer.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

enum {
    FEW = 1,
    MANY = 100000,
    LOOKS = 3
};

struct storing {
    char home[FIXTURE_PATH_BYTES];
    struct model_store *store;
    struct backlog *backlog;
    struct storer *storer;
    struct store_error error;
};

static int set_up(void **state)
{
    static struct storing storing;
    const struct backlog_start start = {.visible_within_ms = 1000};
    storing = (struct storing){0};
    home_make(storing.home);
    const struct store_settings settings = {.home = storing.home, .map_bytes = FIXTURE_MAP_BYTES};
    assert_int_equal(model_store_open(&settings, &storing.store, &storing.error), STORE_OK);
    assert_int_equal(backlog_new(&start, &storing.backlog), 0);
    assert_int_equal(storer_new(storing.backlog, &storing.storer), 0);
    *state = &storing;
    return 0;
}

static int tear_down(void **state)
{
    struct storing *storing = *state;
    storer_free(storing->storer);
    backlog_free(storing->backlog);
    model_store_close(storing->store);
    home_remove(storing->home);
    return 0;
}

static struct model_store_writing *write_words(struct storing *storing, uint32_t count)
{
    struct model_store_writing *writing = NULL;
    const struct model_store_head head = {.learned = 1, .words = count, .next_word = count};
    assert_int_equal(model_store_begin(storing->store, &writing, &storing->error), STORE_OK);
    for (uint32_t i = 0; i < count; i++) {
        char term[16];
        (void)snprintf(term, sizeof term, "lamp%06u", i);
        const struct model_store_word word = {
            .term = term, .term_bytes = strlen(term), .number = i, .count = 1};
        assert_int_equal(model_store_put_word(writing, &word, &storing->error), STORE_OK);
    }
    assert_int_equal(model_store_put_head(writing, &head, &storing->error), STORE_OK);
    return writing;
}

static uint64_t heart_of(const struct storing *storing)
{
    return atomic_load(&backlog_heartbeat(storing->backlog)->counts[HEART_STORER]);
}

/* How far its heart has come with a writing of so many words, once that is committed. */
static uint64_t beats_with(struct storing *storing, uint32_t count)
{
    struct storer_result result = {0};
    struct model_store_writing *writing = write_words(storing, count);
    uint64_t before = heart_of(storing);
    storer_begin(storing->storer, writing);
    assert_true(storer_take(storing->storer, true, &result));
    assert_int_equal(result.code, STORE_OK);
    return heart_of(storing) - before;
}

/* Whoever watches sees it move, however long the whole takes. */
static void a_large_writing_beats_on_the_way(void **state)
{
    uint64_t few = beats_with(*state, FEW);
    assert_true(few > 0);
    assert_true(beats_with(*state, MANY) > few + 10);
}

static void it_rests_once_it_has_committed(void **state)
{
    struct storing *storing = *state;
    struct heartbeat_watch watch = {0};
    (void)beats_with(storing, MANY);
    for (int i = 0; i < LOOKS; i++) {
        assert_int_equal(heartbeat_look(backlog_heartbeat(storing->backlog), &watch), HEART_COUNT);
    }
}

static void what_nobody_has_begun_cannot_be_taken(void **state)
{
    struct storing *storing = *state;
    struct storer_result result;
    assert_false(storer_take(storing->storer, true, &result));
    (void)beats_with(storing, FEW);
    assert_false(storer_take(storing->storer, true, &result)); /* it has been taken */
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_large_writing_beats_on_the_way),
        TEST(it_rests_once_it_has_committed),
        TEST(what_nobody_has_begun_cannot_be_taken),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
