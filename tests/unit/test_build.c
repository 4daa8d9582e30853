/*
 * A model that is learned anew from the stored items, in an environment of its own.
 */
#include "daemon/build.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "storage/model_store_next.h"
#include "tests/unit/model_memory.h"
#include "tests/unit/store_fixture.h"

/* Far more than these items take. */
static const uint64_t BUDGET_BYTES = 64U << 20U;

struct building {
    struct fixture *store;
    struct options options;
    struct build build;
    struct store_error error;
};

static int set_up(void **state)
{
    struct building *building = calloc(1, sizeof *building);
    assert_non_null(building);
    assert_int_equal(fixture_setup((void **)&building->store), 0);
    options_defaults(&building->options);
    *state = building;
    return 0;
}

static int tear_down(void **state)
{
    struct building *building = *state;
    build_close(&building->build);
    assert_int_equal(fixture_teardown((void **)&building->store), 0);
    free(building);
    return 0;
}

static int try_open(struct building *building, uint64_t number, uint64_t moment)
{
    const struct build_settings settings = {.store = building->store->store,
                                            .places = building->store->settings,
                                            .options = &building->options,
                                            .key = {7, 8},
                                            .number = number,
                                            .moment = moment,
                                            .memory_bytes = BUDGET_BYTES};
    return build_open(&settings, &building->build, &building->error);
}

static void open_build(struct building *building, uint64_t number, uint64_t moment)
{
    if (try_open(building, number, moment) != STORE_OK) {
        fail_msg("%s", building->error.text);
    }
}

static void learn_up_to(struct building *building, uint64_t last)
{
    while (building->build.learned < last) {
        if (build_learn(&building->build, last, &building->error) != STORE_OK) {
            fail_msg("%s", building->error.text);
        }
    }
}

static void keep(struct building *building)
{
    assert_int_equal(build_keep(&building->build, &building->error), STORE_OK);
}

static void file(struct building *building, const char *id, const char *text, const char *tag)
{
    const struct names names = {.tags = {tag}};
    (void)fixture_file_as(building->store,
                          (struct item_filing){.id = text_of(id), .text = text_of(text)}, names);
}

/* 1 a, 2 b, 3 c filed; 4 a revised; 5 b withdrawn; 6 d filed. */
static void file_six(struct building *building)
{
    file(building, "a", "fog bell", "weather");
    file(building, "b", "wreck ashore", "wrecks");
    file(building, "c", "lamp oil", "supplies");
    file(building, "a", "dense fog", "weather");
    (void)fixture_withdraw(building->store, "b");
    file(building, "d", "gale and fog", "weather");
}

/* What a model of this moment has in it, learned in one go up to `last`. */
static struct memory *built(struct building *building, uint64_t moment, uint64_t last)
{
    struct memory *memory = memory_new();
    open_build(building, 1, moment);
    learn_up_to(building, last);
    memory_take(memory, building->build.model);
    build_close(&building->build);
    return memory;
}

static void assert_same_and_free(struct memory *one, struct memory *other)
{
    memory_assert_same(one, other);
    free(one);
    free(other);
}

/* --- what it learns ----------------------------------------------------------------------------
 */

static void it_learns_each_item_as_it_is_at_the_moment(void **state)
{
    struct building *building = *state;
    file_six(building);
    struct memory *memory = built(building, 6, 6);
    assert_int_equal(memory->totals.documents, 3); /* a, c, d */
    assert_null(memory_find(memory, "bell"));      /* what a was */
    assert_null(memory_find(memory, "wreck"));     /* what was withdrawn */
    assert_int_equal(memory_find(memory, "fog")->count, 2);
    free(memory);
}

static void what_was_superseded_by_then_makes_no_difference_erased_or_not(void **state)
{
    struct building *building = *state;
    file_six(building);
    struct memory *before = built(building, 6, 6);
    assert_int_equal(fixture_erase(building->store, 6), 2);
    assert_same_and_free(before, built(building, 6, 6));
}

static void changes_behind_the_moment_are_learned_as_changes(void **state)
{
    struct building *building = *state;
    file_six(building);
    open_build(building, 1, 3);
    learn_up_to(building, 3);
    struct model_size size;
    model_measure(building->build.model, &size);
    assert_int_equal(size.documents, 3); /* a, b, c: they were revised and withdrawn later */
    learn_up_to(building, 6);
    model_measure(building->build.model, &size);
    assert_int_equal(size.documents, 3); /* a, c, d */
}

static void it_does_not_matter_when_it_is_at_work(void **state)
{
    struct building *building = *state;
    file(building, "a", "fog bell", "weather");
    file(building, "b", "wreck ashore", "wrecks");
    file(building, "c", "lamp oil", "supplies");
    struct memory *early = memory_new();
    open_build(building, 1, 3);
    learn_up_to(building, 3); /* before the others come */
    file(building, "a", "dense fog", "weather");
    (void)fixture_withdraw(building->store, "b");
    file(building, "a", "fog again", "weather");
    learn_up_to(building, 6);
    memory_take(early, building->build.model);
    build_close(&building->build);
    assert_same_and_free(early, built(building, 3, 6)); /* after all have come */
}

/* --- how it is kept ------------------------------------------------------------------------------
 */

static void it_goes_on_from_where_it_was_kept_and_comes_out_the_same(void **state)
{
    struct building *building = *state;
    file_six(building);
    struct memory *whole = built(building, 4, 6);
    struct memory *resumed = memory_new();
    open_build(building, 2, 4);
    learn_up_to(building, 3);
    memory_take(resumed, building->build.model);
    keep(building);
    build_close(&building->build);
    open_build(building, 2, 4);
    assert_int_equal(building->build.learned, 3);
    assert_int_equal(building->build.kept, 3);
    learn_up_to(building, 6);
    memory_take(resumed, building->build.model); /* what has changed since */
    assert_same_and_free(whole, resumed);
}

static void what_was_not_kept_is_learned_again(void **state)
{
    struct building *building = *state;
    file_six(building);
    open_build(building, 1, 6);
    learn_up_to(building, 2);
    keep(building);
    learn_up_to(building, 5);
    build_close(&building->build);
    open_build(building, 1, 6);
    assert_int_equal(building->build.learned, 2);
}

static void the_build_of_another_rebuild_is_of_no_use(void **state)
{
    struct building *building = *state;
    file_six(building);
    open_build(building, 1, 6);
    learn_up_to(building, 6);
    keep(building);
    build_close(&building->build);
    open_build(building, 2, 6);
    assert_int_equal(building->build.learned, 0);
    build_close(&building->build);
    open_build(building, 1, 6);
    assert_int_equal(building->build.learned, 0); /* and is gone */
}

static void one_with_other_settings_is_of_no_use(void **state)
{
    struct building *building = *state;
    file_six(building);
    open_build(building, 1, 6);
    learn_up_to(building, 6);
    keep(building);
    build_close(&building->build);
    building->options.loss = SURROGATE_HINGE;
    open_build(building, 1, 6);
    assert_int_equal(building->build.learned, 0);
}

static void one_that_is_damaged_is_begun_again(void **state)
{
    struct building *building = *state;
    char path[FIXTURE_PATH_BYTES + 32];
    file_six(building);
    (void)snprintf(path, sizeof path, "%s/model.next", building->store->home);
    assert_int_equal(mkdir(path, 0700), 0);
    (void)snprintf(path, sizeof path, "%s/model.next/data.mdb", building->store->home);
    FILE *file = fopen(path, "w");
    assert_non_null(file);
    for (int i = 0; i < 4096; i++) {
        assert_true(fputs("no page of a store", file) >= 0);
    }
    assert_int_equal(fclose(file), 0);
    open_build(building, 1, 6);
    learn_up_to(building, 6);
    keep(building);
}

static void nothing_learned_is_nothing_to_keep(void **state)
{
    struct building *building = *state;
    struct model_store_head head;
    open_build(building, 1, 0);
    keep(building);
    assert_int_equal(model_store_read_head(building->build.model_store, &head, &building->error),
                     STORE_NOT_FOUND);
}

/* --- what goes wrong -----------------------------------------------------------------------------
 */

static void a_damaged_record_ends_it_with_a_sentence(void **state)
{
    static char bytes[1 << 20];
    struct building *building = *state;
    char path[FIXTURE_PATH_BYTES + 32];
    file(building, "a", "fog", "weather");
    file(building, "b", "schoonerwreckage", "wrecks");
    (void)snprintf(path, sizeof path, "%s/store/data.mdb", building->store->home);
    FILE *store = fopen(path, "r+b");
    assert_non_null(store);
    size_t size = fread(bytes, 1, sizeof bytes, store);
    const char *found = memmem(bytes, size, "schoonerwreckage", 16);
    assert_non_null(found);
    assert_int_equal(fseek(store, found - bytes, SEEK_SET), 0);
    assert_int_equal(fputc('S', store), 'S');
    assert_int_equal(fclose(store), 0);
    open_build(building, 1, 2);
    assert_int_equal(build_learn(&building->build, 2, &building->error), STORE_CORRUPT);
    assert_string_equal(building->error.text, "the record of change 2 is damaged");
    assert_int_equal(building->build.learned, 1);
}

static void a_file_in_the_place_of_its_folder_is_told(void **state)
{
    struct building *building = *state;
    char path[FIXTURE_PATH_BYTES + 32];
    (void)snprintf(path, sizeof path, "%s/model.next", building->store->home);
    FILE *in_the_way = fopen(path, "w");
    assert_non_null(in_the_way);
    assert_int_equal(fclose(in_the_way), 0);
    assert_int_not_equal(try_open(building, 1, 0), STORE_OK);
    assert_non_null(strstr(building->error.text, "model.next"));
    assert_null(building->build.model);
}

static void a_disk_that_is_full_is_told_when_it_is_kept(void **state)
{
    struct building *building = *state;
    file_six(building);
    building->store->settings.reserve_bytes = SIZE_MAX; /* no disk has that much left */
    open_build(building, 1, 6);
    learn_up_to(building, 6);
    assert_int_equal(build_keep(&building->build, &building->error), STORE_FULL);
    assert_int_equal(building->build.kept, 0);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(it_learns_each_item_as_it_is_at_the_moment),
        TEST(what_was_superseded_by_then_makes_no_difference_erased_or_not),
        TEST(changes_behind_the_moment_are_learned_as_changes),
        TEST(it_does_not_matter_when_it_is_at_work),
        TEST(it_goes_on_from_where_it_was_kept_and_comes_out_the_same),
        TEST(what_was_not_kept_is_learned_again),
        TEST(the_build_of_another_rebuild_is_of_no_use),
        TEST(one_with_other_settings_is_of_no_use),
        TEST(one_that_is_damaged_is_begun_again),
        TEST(nothing_learned_is_nothing_to_keep),
        TEST(a_damaged_record_ends_it_with_a_sentence),
        TEST(a_file_in_the_place_of_its_folder_is_told),
        TEST(a_disk_that_is_full_is_told_when_it_is_kept),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
