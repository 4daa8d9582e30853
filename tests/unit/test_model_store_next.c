/* A second model's store, and how it takes the place of the first. */
#include "storage/model_store_next.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <unistd.h>

#include "tests/unit/store_fixture.h"

struct two {
    char home[FIXTURE_PATH_BYTES];
    struct store_settings settings;
    struct model_store *used;
    struct model_store *next;
    struct store_error error;
};

/* Stores a head by which a model is known. */
static void mark(struct two *two, struct model_store *store, const char *text)
{
    struct model_store_writing *writing = NULL;
    struct model_store_head head = {.learned = 1};
    (void)snprintf(head.settings, sizeof head.settings, "%s", text);
    assert_int_equal(model_store_begin(store, &writing, &two->error), STORE_OK);
    assert_int_equal(model_store_put_head(writing, &head, &two->error), STORE_OK);
    assert_int_equal(model_store_commit(writing, &two->error), STORE_OK);
}

static void assert_marked(struct two *two, struct model_store *store, const char *text)
{
    struct model_store_head head;
    assert_int_equal(model_store_read_head(store, &head, &two->error), STORE_OK);
    assert_string_equal(head.settings, text);
}

static void open_both(struct two *two)
{
    assert_int_equal(model_store_open(&two->settings, &two->used, &two->error), STORE_OK);
    assert_int_equal(model_store_open_next(&two->settings, &two->next, &two->error), STORE_OK);
}

static void close_both(struct two *two)
{
    model_store_close(two->used);
    model_store_close(two->next);
    two->used = NULL;
    two->next = NULL;
}

static int set_up(void **state)
{
    struct two *two = calloc(1, sizeof *two);
    assert_non_null(two);
    home_make(two->home);
    two->settings = (struct store_settings){.home = two->home, .map_bytes = FIXTURE_MAP_BYTES};
    open_both(two);
    mark(two, two->used, "old");
    mark(two, two->next, "new");
    *state = two;
    return 0;
}

static int tear_down(void **state)
{
    struct two *two = *state;
    close_both(two);
    home_remove(two->home);
    free(two);
    return 0;
}

static bool is_there(const struct two *two, const char *name)
{
    char path[FIXTURE_PATH_BYTES + 32];
    (void)snprintf(path, sizeof path, "%s/%s", two->home, name);
    return access(path, F_OK) == 0;
}

static void the_two_are_apart(void **state)
{
    struct two *two = *state;
    close_both(two);
    open_both(two);
    assert_marked(two, two->used, "old");
    assert_marked(two, two->next, "new");
}

static void exchanged_the_next_one_is_found_in_the_place_of_the_first(void **state)
{
    struct two *two = *state;
    assert_int_equal(model_store_exchange(two->used, two->next, &two->error), STORE_OK);
    assert_int_equal(model_store_settle(&two->settings, &two->error), STORE_OK);
    assert_marked(two, two->used, "old"); /* whoever has them open has what they had */
    assert_marked(two, two->next, "new");
    close_both(two);
    open_both(two);
    assert_marked(two, two->used, "new");
    assert_marked(two, two->next, "old");
}

static void both_can_be_written_and_measured_behind_the_exchange(void **state)
{
    struct two *two = *state;
    assert_int_equal(model_store_exchange(two->used, two->next, &two->error), STORE_OK);
    mark(two, two->next, "newer");
    model_store_close(two->used); /* the old one, now in the folder of the next */
    two->used = NULL;
    assert_int_equal(model_store_remove_next(&two->settings, &two->error), STORE_OK);
    assert_false(is_there(two, "model.next"));
    mark(two, two->next, "newest"); /* what is in use does not mind */
    assert_true(model_store_file_bytes(two->next) > 0);
    size_t left = 1;
    for (int i = 0; i < 10 && left > 0; i++) { /* it is opened anew, in its new place */
        assert_int_equal(model_store_scrub(two->next, 1024, &left, &two->error), STORE_OK);
    }
    assert_int_equal(left, 0);
    assert_marked(two, two->next, "newest");
}

static void an_exchange_that_fails_changes_nothing(void **state)
{
    struct two *two = *state;
    char path[FIXTURE_PATH_BYTES + 32];
    char aside[FIXTURE_PATH_BYTES + 32];
    (void)snprintf(path, sizeof path, "%s/model.next", two->home);
    (void)snprintf(aside, sizeof aside, "%s/aside", two->home);
    assert_int_equal(rename(path, aside), 0);
    assert_int_equal(model_store_exchange(two->used, two->next, &two->error), STORE_BROKEN);
    assert_non_null(strstr(two->error.text, "cannot be exchanged: No such file or directory"));
    assert_int_equal(rename(aside, path), 0);
    close_both(two);
    open_both(two);
    assert_marked(two, two->used, "old");
    assert_marked(two, two->next, "new");
}

static void removed_there_is_none_and_none_to_remove(void **state)
{
    struct two *two = *state;
    close_both(two);
    assert_int_equal(model_store_remove_next(&two->settings, &two->error), STORE_OK);
    assert_false(is_there(two, "model.next"));
    assert_true(is_there(two, "model/data.mdb"));
    assert_int_equal(model_store_remove_next(&two->settings, &two->error), STORE_OK);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(the_two_are_apart),
        TEST(exchanged_the_next_one_is_found_in_the_place_of_the_first),
        TEST(both_can_be_written_and_measured_behind_the_exchange),
        TEST(an_exchange_that_fails_changes_nothing),
        TEST(removed_there_is_none_and_none_to_remove),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
