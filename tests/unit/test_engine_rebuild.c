/*
 * A home in which a model is learned anew: what it answers then, and in what state a crash may
 * leave it. Those states are made by hand, one for each step of the way.
 */
#include "daemon/engine.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <errno.h>

#include "daemon/learning_notes.h"
#include "storage/model_store_next.h"
#include "tests/unit/engine_fixture.h"

enum {
    ITEMS = 150
};

static const char DRAFT[] = "log t3q0 t3q1 t9q1 t9q2 n5q0";

struct rebuilt {
    struct opened *opened;
    struct stream stream;
    struct asked old; /* what the old model answers to the draft */
    struct asked new;
};

/* --- the fixture --- */

static uint64_t begin_rebuild(struct opened *opened, enum surrogate loss)
{
    struct store_error error = {0};
    struct options wanted = opened->options;
    uint64_t seq = 0;
    engine_lay_over(opened->engine, &wanted);
    wanted.loss = loss;
    assert_int_equal(engine_rebuild(opened->engine, &wanted, &seq, &error), 0);
    return seq;
}

static struct rebuild_state state_of(struct opened *opened)
{
    struct rebuild_state rebuild;
    engine_read_rebuild(opened->engine, &rebuild);
    return rebuild;
}

static void wait_until_built(struct opened *opened)
{
    while (state_of(opened).is_running) {
        (void)sched_yield();
    }
}

static enum surrogate loss_of(struct opened *opened)
{
    struct options options = opened->options;
    engine_lay_over(opened->engine, &options);
    return options.loss;
}

/* The old model is in the home; what the new one answers has been found out in another. */
static int set_up(void **state)
{
    struct rebuilt *rebuilt = calloc(1, sizeof *rebuilt);
    void *other = NULL;
    assert_non_null(rebuilt);
    assert_int_equal(opened_set_up(&other), 0);
    rebuilt->stream = (struct stream){.random = {4}, .tag_count = 40, .given_share = 0.8};
    file_stream(other, &rebuilt->stream, 0, ITEMS);
    (void)begin_rebuild(other, SURROGATE_HINGE);
    wait_until_built(other);
    ask_draft(other, DRAFT, &rebuilt->new);
    assert_int_equal(opened_tear_down(&other), 0);
    assert_int_equal(opened_set_up((void **)&rebuilt->opened), 0);
    rebuilt->stream = (struct stream){.random = {4}, .tag_count = 40, .given_share = 0.8};
    file_stream(rebuilt->opened, &rebuilt->stream, 0, ITEMS);
    ask_draft(rebuilt->opened, DRAFT, &rebuilt->old);
    *state = rebuilt;
    return 0;
}

static int tear_down(void **state)
{
    struct rebuilt *rebuilt = *state;
    int result = opened_tear_down((void **)&rebuilt->opened);
    free(rebuilt);
    return result;
}

static void assert_answers(struct rebuilt *rebuilt, const struct asked *expected)
{
    struct asked asked;
    ask_draft(rebuilt->opened, DRAFT, &asked);
    assert_same_asked(expected, &asked);
}

static bool has_next(const struct rebuilt *rebuilt)
{
    char path[FIXTURE_PATH_BYTES + 32];
    (void)snprintf(path, sizeof path, "%s/model.next", rebuilt->opened->home);
    return access(path, F_OK) == 0;
}

/* --- from the beginning to the end --- */

static void a_rebuilt_model_answers_with_its_settings(void **state)
{
    struct rebuilt *rebuilt = *state;
    assert_int_equal(begin_rebuild(rebuilt->opened, SURROGATE_HINGE), ITEMS);
    wait_until_built(rebuilt->opened);
    assert_int_equal(loss_of(rebuilt->opened), SURROGATE_HINGE);
    assert_int_equal(rebuilt->opened->options.loss, SURROGATE_SQUARED_HINGE); /* as configured */
    assert_true(rebuilt->old.gaps[0].score != rebuilt->new.gaps[0].score);
    assert_answers(rebuilt, &rebuilt->new);
    assert_false(has_next(rebuilt));
    struct rebuild_state rebuild = state_of(rebuilt->opened);
    assert_true(rebuild.has_ended);
    assert_int_equal(rebuild.ended_seq, ITEMS);
    assert_string_equal(rebuild.failure, "");
}

static void opened_again_it_is_the_rebuilt_one_with_nothing_to_learn(void **state)
{
    struct rebuilt *rebuilt = *state;
    (void)begin_rebuild(rebuilt->opened, SURROGATE_HINGE);
    wait_until_built(rebuilt->opened);
    close_home(rebuilt->opened);
    open_home(rebuilt->opened);
    assert_int_equal(engine_count(rebuilt->opened->engine).progress.learned, ITEMS);
    assert_int_equal(loss_of(rebuilt->opened), SURROGATE_HINGE);
    assert_answers(rebuilt, &rebuilt->new);
}

static void a_workspace_of_the_old_model_cannot_ask_the_new_one(void **state)
{
    struct rebuilt *rebuilt = *state;
    struct engine *engine = rebuilt->opened->engine;
    struct workspace *old = workspaces_borrow(engine_workspaces(engine));
    const struct model_question question = {.most = 1};
    struct model_answer answer;
    uint64_t learned = 0;
    assert_non_null(old);
    assert_int_equal(engine_ask(engine, &question, old, &answer, &learned), 0);
    (void)begin_rebuild(rebuilt->opened, SURROGATE_HINGE);
    wait_until_built(rebuilt->opened);
    assert_int_equal(engine_ask(engine, &question, old, &answer, &learned), -ESTALE);
    workspaces_return(engine_workspaces(engine), old);
    struct workspace *new = workspaces_borrow(engine_workspaces(engine));
    assert_non_null(new);
    assert_int_equal(engine_ask(engine, &question, new, &answer, &learned), 0);
    workspaces_return(engine_workspaces(engine), new);
}

static void items_hold_as_many_words_as_the_new_settings_count(void **state)
{
    struct rebuilt *rebuilt = *state;
    struct opened *opened = rebuilt->opened;
    static const char TEXT[] = "fog bell lamp"; /* three words, and two pairs of them */
    const struct features_source source = {.text = TEXT, .text_bytes = sizeof TEXT - 1};
    struct options wanted = opened->options;
    struct store_error error = {0};
    uint64_t seq = 0;
    struct change change = {.kind = CHANGE_FILE,
                            .filing = {.id = text_of("log/limit"), .text = text_of(TEXT)},
                            .counted = &source,
                            .words_limit = 4};
    wanted.word_pairs = true;
    assert_int_equal(engine_rebuild(opened->engine, &wanted, &seq, &error), 0);
    wait_until_built(opened);
    apply(opened, &change);
    assert_int_equal(change.code, STORE_REFUSED);
    assert_true(change.has_too_many_words);
}

static void what_was_withdrawn_meanwhile_is_erased_once_it_is_in_use(void **state)
{
    struct rebuilt *rebuilt = *state;
    struct opened *opened = rebuilt->opened;
    (void)FILE_ITEM(opened, "log/wreck", "schoonerwreckage", "casualties");
    (void)begin_rebuild(opened, SURROGATE_HINGE);
    withdraw_item(opened, "log/wreck");
    wait_until_built(opened);
    close_home(opened);
    assert_int_equal(home_occurrences(opened->home, "store/data.mdb", "schoonerwreckage"), 0);
    assert_int_equal(home_occurrences(opened->home, "model/data.mdb", "schoonerwreckage"), 0);
    open_home(opened);
}

/* --- as a crash may leave it --- */

/* Changes the notes of the closed home. */
static void edit_notes(struct rebuilt *rebuilt, void (*edit)(struct learning_notes *notes))
{
    const struct store_settings settings = {.home = rebuilt->opened->home,
                                            .map_bytes = FIXTURE_MAP_BYTES};
    struct store_error error = {0};
    struct store *store = NULL;
    struct learning_notes notes;
    assert_int_equal(store_open(&settings, &store, &error), STORE_OK);
    assert_int_equal(learning_notes_read(store, &notes, &error), STORE_OK);
    edit(&notes);
    assert_int_equal(learning_notes_write(store, &notes, &error), STORE_OK);
    store_close(store);
}

/* Makes a folder of a model that is not in use. */
static void make_next(struct rebuilt *rebuilt)
{
    const struct store_settings settings = {.home = rebuilt->opened->home,
                                            .map_bytes = FIXTURE_MAP_BYTES};
    struct store_error error = {0};
    struct model_store *store = NULL;
    assert_int_equal(model_store_open_next(&settings, &store, &error), STORE_OK);
    model_store_close(store);
}

static void note_hinge(struct learning_notes *notes)
{
    struct options configured;
    struct options wanted;
    options_defaults(&configured);
    wanted = configured;
    wanted.loss = SURROGATE_HINGE;
    learning_choose(&configured, &wanted, 5, ITEMS, &notes->next);
}

static void take_note_back(struct learning_notes *notes)
{
    notes->next = notes->used;
    notes->used = (struct learning_choices){0};
}

static void noted_but_not_begun_it_is_built_at_the_next_start(void **state)
{
    struct rebuilt *rebuilt = *state;
    close_home(rebuilt->opened);
    edit_notes(rebuilt, note_hinge);
    open_home(rebuilt->opened);
    wait_until_built(rebuilt->opened);
    assert_int_equal(loss_of(rebuilt->opened), SURROGATE_HINGE);
    assert_answers(rebuilt, &rebuilt->new);
}

static void noted_with_an_empty_folder_it_is_built_at_the_next_start(void **state)
{
    struct rebuilt *rebuilt = *state;
    close_home(rebuilt->opened);
    edit_notes(rebuilt, note_hinge);
    make_next(rebuilt);
    open_home(rebuilt->opened);
    wait_until_built(rebuilt->opened);
    assert_answers(rebuilt, &rebuilt->new);
    assert_false(has_next(rebuilt));
}

static void exchanged_but_not_noted_it_is_in_use(void **state)
{
    struct rebuilt *rebuilt = *state;
    (void)begin_rebuild(rebuilt->opened, SURROGATE_HINGE);
    wait_until_built(rebuilt->opened);
    close_home(rebuilt->opened);
    edit_notes(rebuilt, take_note_back);
    make_next(rebuilt); /* the old model is still there */
    open_home(rebuilt->opened);
    assert_false(state_of(rebuilt->opened).is_running);
    assert_int_equal(loss_of(rebuilt->opened), SURROGATE_HINGE);
    assert_int_equal(engine_count(rebuilt->opened->engine).progress.learned, ITEMS);
    assert_answers(rebuilt, &rebuilt->new);
    assert_false(has_next(rebuilt));
}

static void move_in_home(const struct rebuilt *rebuilt, const char *from, const char *to)
{
    char from_path[FIXTURE_PATH_BYTES + 32];
    char to_path[FIXTURE_PATH_BYTES + 32];
    (void)snprintf(from_path, sizeof from_path, "%s/%s", rebuilt->opened->home, from);
    (void)snprintf(to_path, sizeof to_path, "%s/%s", rebuilt->opened->home, to);
    assert_int_equal(rename(from_path, to_path), 0);
}

/* Items that take long to learn: none of their words is in another. */
static void file_long_items(struct opened *opened, int count)
{
    enum {
        WORDS = 4000,
        WORD_BYTES = 12
    };
    static char text[WORDS * WORD_BYTES];
    static const char *const TAGS[] = {"tag 1", "tag 2", NULL};
    for (int item = 0; item < count; item++) {
        char id[32];
        size_t used = 0;
        for (int word = 0; word < WORDS; word++) {
            used += (size_t)snprintf(text + used, sizeof text - used, "i%dw%d ", item, word);
        }
        (void)snprintf(id, sizeof id, "log/long %d", item);
        (void)file_item(opened, id, text, TAGS);
    }
}

/* The model in use was stored last long before the build was, which had passed the moment. A build
 * that took its place too early would have the changes between learned once more. */
static void stored_behind_the_build_the_model_comes_to_it_before_it_is_replaced(void **state)
{
    enum {
        MORE = 40 /* the build is there before the trainer is through with them */
    };
    struct rebuilt *rebuilt = *state;
    struct opened *opened = rebuilt->opened;
    struct asked expected;
    close_home(opened);
    move_in_home(rebuilt, "model", "model.old"); /* learned up to the moment */
    open_home(opened);
    (void)begin_rebuild(opened, SURROGATE_HINGE);
    wait_until_built(opened);
    file_long_items(opened, MORE);
    wait_until_learned(opened, ITEMS + MORE);
    ask_draft(opened, DRAFT, &expected);
    close_home(opened);
    edit_notes(rebuilt, take_note_back);
    move_in_home(rebuilt, "model", "model.next");
    move_in_home(rebuilt, "model.old", "model");
    open_home(opened);
    wait_until_built(opened);
    wait_until_learned(opened, ITEMS + MORE);
    assert_answers(rebuilt, &expected);
}

static void a_folder_that_nobody_builds_in_is_removed(void **state)
{
    struct rebuilt *rebuilt = *state;
    close_home(rebuilt->opened);
    make_next(rebuilt);
    assert_true(has_next(rebuilt));
    open_home(rebuilt->opened);
    assert_false(has_next(rebuilt));
    assert_answers(rebuilt, &rebuilt->old);
}

static void a_model_that_is_lost_is_learned_again_with_the_settings_of_the_rebuild(void **state)
{
    struct rebuilt *rebuilt = *state;
    char path[FIXTURE_PATH_BYTES + 32];
    (void)begin_rebuild(rebuilt->opened, SURROGATE_HINGE);
    wait_until_built(rebuilt->opened);
    close_home(rebuilt->opened);
    (void)snprintf(path, sizeof path, "%s/model", rebuilt->opened->home);
    home_remove(path);
    open_home(rebuilt->opened);
    wait_until_learned(rebuilt->opened, ITEMS);
    assert_int_equal(loss_of(rebuilt->opened), SURROGATE_HINGE);
    assert_answers(rebuilt, &rebuilt->new);
}

/* --- what goes wrong --- */

static void a_damaged_record_ends_it_and_the_old_model_stays(void **state)
{
    static char bytes[4 << 20];
    struct rebuilt *rebuilt = *state;
    struct opened *opened = rebuilt->opened;
    char path[FIXTURE_PATH_BYTES + 32];
    char fault[TROUBLE_BYTES];
    struct asked before;
    (void)FILE_ITEM(opened, "log/wreck", "schoonerwreckage", "casualties");
    ask_draft(opened, DRAFT, &before);
    (void)snprintf(path, sizeof path, "%s/store/data.mdb", opened->home);
    FILE *file = fopen(path, "r+b");
    assert_non_null(file);
    size_t size = fread(bytes, 1, sizeof bytes, file);
    const char *found = memmem(bytes, size, "schoonerwreckage", 16);
    assert_non_null(found);
    assert_int_equal(fseek(file, found - bytes, SEEK_SET), 0);
    assert_int_equal(fputc('S', file), 'S');
    assert_int_equal(fclose(file), 0);
    (void)begin_rebuild(opened, SURROGATE_HINGE);
    wait_until_built(opened);
    struct rebuild_state rebuild = state_of(opened);
    assert_string_equal(rebuild.failure, "the rebuild has ended behind change 150 (the record of "
                                         "change 151 is damaged); the model stays as it was");
    troubles_read(engine_troubles(opened->engine), TROUBLE_REBUILDING, fault);
    assert_string_equal(fault, rebuild.failure);
    assert_int_equal(loss_of(opened), SURROGATE_SQUARED_HINGE);
    assert_answers(rebuilt, &before);
    assert_false(has_next(rebuilt));
    close_home(opened);
    open_home(opened);
    assert_false(state_of(opened).is_running); /* it is not tried again by itself */
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_rebuilt_model_answers_with_its_settings),
        TEST(opened_again_it_is_the_rebuilt_one_with_nothing_to_learn),
        TEST(a_workspace_of_the_old_model_cannot_ask_the_new_one),
        TEST(items_hold_as_many_words_as_the_new_settings_count),
        TEST(what_was_withdrawn_meanwhile_is_erased_once_it_is_in_use),
        TEST(noted_but_not_begun_it_is_built_at_the_next_start),
        TEST(noted_with_an_empty_folder_it_is_built_at_the_next_start),
        TEST(exchanged_but_not_noted_it_is_in_use),
        TEST(stored_behind_the_build_the_model_comes_to_it_before_it_is_replaced),
        TEST(a_folder_that_nobody_builds_in_is_removed),
        TEST(a_model_that_is_lost_is_learned_again_with_the_settings_of_the_rebuild),
        TEST(a_damaged_record_ends_it_and_the_old_model_stays),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
