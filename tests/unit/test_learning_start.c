/* What is in force when a home is opened, of the notes, the configuration and the model. */
#include "daemon/learning_start.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "storage/store_notes.h"
#include "tests/unit/store_fixture.h"

struct starting {
    struct fixture *store;
    struct model_store *model_store;
    struct options configured;
    struct learning_start start;
    struct store_error error;
};

static int set_up(void **state)
{
    struct starting *starting = calloc(1, sizeof *starting);
    assert_non_null(starting);
    assert_int_equal(fixture_setup((void **)&starting->store), 0);
    assert_int_equal(
        model_store_open(&starting->store->settings, &starting->model_store, &starting->error),
        STORE_OK);
    options_defaults(&starting->configured);
    *state = starting;
    return 0;
}

static int tear_down(void **state)
{
    struct starting *starting = *state;
    model_store_close(starting->model_store);
    assert_int_equal(fixture_teardown((void **)&starting->store), 0);
    free(starting);
    return 0;
}

static struct learning_choices choices_of(const struct starting *starting, uint64_t number,
                                          const char *pair)
{
    char error[OPTIONS_ERROR_BYTES];
    struct options wanted = starting->configured;
    struct learning_choices choices;
    assert_int_equal(options_set_pair(&wanted, pair, error), 0);
    learning_choose(&starting->configured, &wanted, number, 7, &choices);
    return choices;
}

static void note(struct starting *starting, struct learning_choices used,
                 struct learning_choices next)
{
    const struct learning_notes notes = {.used = used, .next = next};
    assert_int_equal(learning_notes_write(starting->store->store, &notes, &starting->error),
                     STORE_OK);
}

/* Stores a model that says to be of this rebuild, and of the store unless another's is given. */
static void store_model(struct starting *starting, uint64_t number, const unsigned char *uuid)
{
    struct model_store_head head = {.learned = 7};
    struct model_store_writing *writing = NULL;
    assert_int_equal(
        learning_text(&starting->configured, number, head.settings, sizeof head.settings), 0);
    memcpy(head.store_uuid, uuid ? uuid : store_uuid(starting->store->store), STORE_UUID_BYTES);
    assert_int_equal(model_store_begin(starting->model_store, &writing, &starting->error),
                     STORE_OK);
    assert_int_equal(model_store_put_head(writing, &head, &starting->error), STORE_OK);
    assert_int_equal(model_store_commit(writing, &starting->error), STORE_OK);
}

static void find_out(struct starting *starting)
{
    int code = learning_start(starting->store->store, starting->model_store, &starting->configured,
                              &starting->start, &starting->error);
    if (code != STORE_OK) {
        fail_msg("%s", starting->error.text);
    }
}

static struct learning_notes notes_of(struct starting *starting)
{
    struct learning_notes notes;
    assert_int_equal(learning_notes_read(starting->store->store, &notes, &starting->error),
                     STORE_OK);
    return notes;
}

static void where_nothing_is_noted_the_configuration_is_in_force(void **state)
{
    struct starting *starting = *state;
    char text[MODEL_STORE_SETTINGS_BYTES];
    starting->configured.step = 0.125;
    find_out(starting);
    assert_true(starting->start.used.step == 0.125);
    assert_int_equal(starting->start.notes.next.number, 0);
    assert_int_equal(options_learning_text(&starting->configured, text, sizeof text), 0);
    assert_string_equal(starting->start.text, text); /* a model of before is still known */
}

static void what_a_rebuild_has_left_is_in_force(void **state)
{
    struct starting *starting = *state;
    note(starting, choices_of(starting, 3, "step=0.25"), (struct learning_choices){0});
    find_out(starting);
    assert_true(starting->start.used.step == 0.25);
    assert_int_equal(learning_number_of(starting->start.text), 3);
}

static void a_model_that_is_being_built_is_not_in_force(void **state)
{
    struct starting *starting = *state;
    note(starting, choices_of(starting, 3, "step=0.25"), choices_of(starting, 4, "loss=hinge"));
    store_model(starting, 3, NULL);
    find_out(starting);
    assert_true(starting->start.used.step == 0.25);
    assert_int_equal(starting->start.used.loss, SURROGATE_SQUARED_HINGE);
    assert_int_equal(starting->start.next.loss, SURROGATE_HINGE);
    assert_int_equal(starting->start.notes.next.number, 4);
    assert_int_equal(starting->start.notes.next.seq, 7);
}

static void a_built_model_in_its_place_is_in_force_though_not_noted_yet(void **state)
{
    struct starting *starting = *state;
    note(starting, choices_of(starting, 3, "step=0.25"), choices_of(starting, 4, "loss=hinge"));
    store_model(starting, 4, NULL);
    find_out(starting);
    assert_true(starting->start.used.step == 0.0);
    assert_int_equal(starting->start.used.loss, SURROGATE_HINGE);
    assert_int_equal(learning_number_of(starting->start.text), 4);
    assert_int_equal(notes_of(starting).used.number, 4); /* it is noted now */
    assert_int_equal(notes_of(starting).next.number, 0);
}

static void a_model_of_another_store_has_taken_nobodys_place(void **state)
{
    static const unsigned char OTHER[STORE_UUID_BYTES] = {1};
    struct starting *starting = *state;
    note(starting, (struct learning_choices){0}, choices_of(starting, 4, "loss=hinge"));
    store_model(starting, 4, OTHER);
    find_out(starting);
    assert_int_equal(starting->start.used.loss, SURROGATE_SQUARED_HINGE);
    assert_int_equal(starting->start.notes.next.number, 4);
}

static void what_the_configuration_has_overtaken_is_forgotten_for_good(void **state)
{
    struct starting *starting = *state;
    note(starting, choices_of(starting, 3, "step=0.25"), choices_of(starting, 4, "step=0.3"));
    starting->configured.step = 0.5;
    find_out(starting);
    assert_true(starting->start.used.step == 0.5);
    assert_true(starting->start.next.step == 0.5);
    assert_int_equal(notes_of(starting).used.count, 0);
    assert_int_equal(notes_of(starting).next.count, 0);
    starting->configured.step = 0.0; /* as it was when the rebuild was asked for */
    find_out(starting);
    assert_true(starting->start.used.step == 0.0);
}

static void a_note_that_cannot_be_read_leaves_it_to_the_configuration(void **state)
{
    struct starting *starting = *state;
    struct store_view *view = fixture_write(starting->store);
    assert_int_equal(store_put_note(view, "learning", "no choices", 10, &starting->error),
                     STORE_OK);
    fixture_commit(view);
    find_out(starting);
    assert_true(starting->start.used.step == 0.0);
    assert_int_equal(starting->start.notes.used.number, 0);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(where_nothing_is_noted_the_configuration_is_in_force),
        TEST(what_a_rebuild_has_left_is_in_force),
        TEST(a_model_that_is_being_built_is_not_in_force),
        TEST(a_built_model_in_its_place_is_in_force_though_not_noted_yet),
        TEST(a_model_of_another_store_has_taken_nobodys_place),
        TEST(what_the_configuration_has_overtaken_is_forgotten_for_good),
        TEST(a_note_that_cannot_be_read_leaves_it_to_the_configuration),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
