/* How a built model takes the place of the one in use, with the test as the trainer. */
#include "daemon/rebuild.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <errno.h>
#include <unistd.h>

#include "tests/unit/store_fixture.h"

enum {
    ITEMS = 3,
    HOUR_MS = 3600 * 1000,
    GUARD_S = 120 /* a test that waits for what never comes ends */
};

struct taking {
    struct fixture *store;
    struct model_store *model_store;
    struct shared_model shared;
    struct backlog *backlog;
    struct troubles troubles;
    struct options options;
    struct change_reader *reader;
    char text[MODEL_STORE_SETTINGS_BYTES];
    struct rebuild *rebuild;
    struct store_error error;
    size_t words_told; /* how often other words were told of */
};

static void on_words(void *user, const struct features_settings *words)
{
    struct taking *taking = user;
    assert_true(words->words.pairs);
    taking->words_told++;
}

static void on_let_go(void *user)
{
    (void)user;
}

static void open_parts(struct taking *taking)
{
    static const struct siphash_key KEY = {7, 8};
    const struct backlog_start start = {.committed = ITEMS};
    const struct model_settings settings = options_model_settings(&taking->options);
    struct features_settings words = options_features_settings(&taking->options);
    struct model *model = NULL;
    words.key = KEY;
    assert_int_equal(
        model_store_open(&taking->store->settings, &taking->model_store, &taking->error), STORE_OK);
    assert_int_equal(model_new(&settings, &KEY, &model), 0);
    assert_int_equal(shared_model_init_take(&taking->shared, model, taking->model_store, 0), 0);
    assert_int_equal(backlog_new(&start, &taking->backlog), 0);
    assert_int_equal(troubles_init(&taking->troubles), 0);
    assert_int_equal(change_reader_new(&words, &taking->reader), 0);
    const struct rebuild_settings wanted = {
        .store = taking->store->store,
        .places = taking->store->settings,
        .backlog = taking->backlog,
        .troubles = &taking->troubles,
        .key = KEY,
        .configured = taking->options,
        .start = {.used = taking->options, .next = taking->options},
        .user = taking,
        .words = on_words,
        .let_go = on_let_go};
    assert_int_equal(rebuild_new(&wanted, &taking->rebuild), 0);
}

/* 1 a filed, 2 a revised, 3 b filed; the model in use has learned nothing yet. */
static int set_up(void **state)
{
    struct taking *taking = calloc(1, sizeof *taking);
    assert_non_null(taking);
    (void)alarm(GUARD_S);
    assert_int_equal(fixture_setup((void **)&taking->store), 0);
    (void)fixture_file_text(taking->store, "a", "fog bell");
    (void)fixture_file_text(taking->store, "a", "dense fog");
    (void)fixture_file_text(taking->store, "b", "lamp");
    options_defaults(&taking->options);
    open_parts(taking);
    *state = taking;
    return 0;
}

static int tear_down(void **state)
{
    struct taking *taking = *state;
    rebuild_stop(taking->rebuild);
    rebuild_free(taking->rebuild);
    change_reader_free(taking->reader);
    model_store_close(taking->shared.store);
    shared_model_deinit(&taking->shared);
    backlog_free(taking->backlog);
    troubles_deinit(&taking->troubles);
    assert_int_equal(fixture_teardown((void **)&taking->store), 0);
    free(taking);
    return 0;
}

static int begin(struct taking *taking, uint64_t *ret_seq)
{
    struct options wanted = taking->options;
    wanted.word_pairs = true;
    return rebuild_begin(taking->rebuild, &wanted, ret_seq, &taking->error);
}

/* The trainer is nudged once the build waits for it. */
static void wait_until_ready(struct taking *taking)
{
    (void)backlog_wait_for_work(taking->backlog, UINT64_MAX, HOUR_MS);
}

static bool take_over(struct taking *taking, uint64_t learned)
{
    const struct rebuild_trainer trainer = {
        .learned = learned, .reader = &taking->reader, .text = taking->text};
    return rebuild_take_over(taking->rebuild, &taking->shared, &trainer);
}

static void while_it_is_barred_none_begins(void **state)
{
    struct taking *taking = *state;
    uint64_t seq = 0;
    assert_true(rebuild_bar(taking->rebuild));
    assert_int_equal(begin(taking, &seq), -EAGAIN);
    assert_int_equal(rebuild_memory_bytes(taking->rebuild), 0);
    rebuild_unbar(taking->rebuild);
    assert_int_equal(begin(taking, &seq), 0);
    assert_true(rebuild_memory_bytes(taking->rebuild) > 0);
}

/* It ends when the trainer takes it, which nobody does here. */
static void one_that_is_under_way_cannot_be_barred(void **state)
{
    struct taking *taking = *state;
    uint64_t seq = 0;
    assert_int_equal(begin(taking, &seq), 0);
    assert_false(rebuild_bar(taking->rebuild));
    assert_int_equal(begin(taking, &seq), -EBUSY); /* it is not barred either */
}

static void where_none_is_built_there_is_none_to_take(void **state)
{
    assert_false(take_over(*state, ITEMS));
}

/* Otherwise the trainer would learn 2 as a change of 1, which the build has passed over. */
static void it_is_not_taken_before_the_trainer_has_come_to_where_it_began(void **state)
{
    struct taking *taking = *state;
    uint64_t seq = 0;
    assert_int_equal(begin(taking, &seq), 0);
    assert_int_equal(seq, ITEMS);
    wait_until_ready(taking);
    assert_false(take_over(taking, 1));
    assert_false(take_over(taking, ITEMS - 1));
    assert_true(take_over(taking, ITEMS));
}

static void taken_it_stands_in_the_place_of_the_old_one_with_all_that_belongs_to_it(void **state)
{
    struct taking *taking = *state;
    struct change_reader *old_reader = taking->reader;
    const struct model *old_model = taking->shared.model;
    struct model_store_head head;
    struct model_size size;
    uint64_t seq = 0;
    assert_int_equal(begin(taking, &seq), 0);
    wait_until_ready(taking);
    assert_true(take_over(taking, ITEMS));
    assert_ptr_not_equal(taking->shared.model, old_model);
    assert_ptr_not_equal(taking->shared.store, taking->model_store);
    assert_ptr_not_equal(taking->reader, old_reader);
    assert_int_equal(taking->shared.version, 1);
    assert_int_equal(taking->words_told, 1);
    model_measure(taking->shared.model, &size);
    assert_int_equal(size.documents, 2);
    assert_int_equal(model_store_read_head(taking->shared.store, &head, &taking->error), STORE_OK);
    assert_int_equal(head.learned, ITEMS); /* it is stored as far as it has learned */
    assert_string_equal(head.settings, taking->text);
    assert_non_null(strstr(taking->text, "word_pairs=on"));
}

static void a_second_one_is_refused_until_the_first_has_ended(void **state)
{
    struct taking *taking = *state;
    uint64_t seq = 0;
    struct rebuild_state now = {.is_running = true};
    assert_int_equal(begin(taking, &seq), 0);
    wait_until_ready(taking);
    assert_int_equal(begin(taking, &seq), -EBUSY);
    assert_true(take_over(taking, ITEMS));
    while (now.is_running) {
        rebuild_read(taking->rebuild, &now);
    }
    assert_int_equal(begin(taking, &seq), 0);
}

static void none_is_taken_once_it_is_to_stop(void **state)
{
    struct taking *taking = *state;
    uint64_t seq = 0;
    assert_int_equal(begin(taking, &seq), 0);
    wait_until_ready(taking);
    rebuild_stop(taking->rebuild);
    assert_false(take_over(taking, ITEMS));
    assert_int_equal(begin(taking, &seq), -EBUSY);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(while_it_is_barred_none_begins),
        TEST(one_that_is_under_way_cannot_be_barred),
        TEST(where_none_is_built_there_is_none_to_take),
        TEST(it_is_not_taken_before_the_trainer_has_come_to_where_it_began),
        TEST(taken_it_stands_in_the_place_of_the_old_one_with_all_that_belongs_to_it),
        TEST(a_second_one_is_refused_until_the_first_has_ended),
        TEST(none_is_taken_once_it_is_to_stop),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
