/*
 * Stale entries of the worklist are scored again, however little memory there is: what was scored
 * again is stored in between, as what was learned is.
 */
#include "daemon/trainer.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <sched.h>

#include "storage/model_view.h"
#include "tests/unit/trainer_fixture.h"

/*
 * A third of the budget, 128 KiB, is for what waits to be stored. The worklist's counts take 33
 * KiB of it and three words 20, so that 257 changed entries, for which there is room for 512, of
 * some 300 bytes each, are too many: a third of those that are stale.
 */
enum {
    ENTRIES = 900,
    TINY_BUDGET_BYTES = 384 << 10
};

/* Of three words and two tags, so that each may lack the tag that it has not. */
static void file_entry(struct training *training, struct store_view *view, int number)
{
    char id[16];
    struct item_refusal refusal = {0};
    struct item_filed filed = {0};
    const struct store_text tag = text_of(number % 3 ? "weather" : "casualties");
    (void)snprintf(id, sizeof id, "log/%d", number);
    const struct item_filing filing = {.id = text_of(id),
                                       .text = text_of(number % 2 ? "fog bell" : "fog lamp"),
                                       .tags = &tag,
                                       .tag_count = 1,
                                       .open_unknown = true};
    assert_int_equal(
        items_file(view, &filing, &training->store->buffer, &filed, &refusal, &training->error),
        STORE_OK);
}

static void file_entries(struct training *training)
{
    struct store_view *view = fixture_write(training->store);
    for (int i = 0; i < ENTRIES; i++) {
        file_entry(training, view, i);
    }
    fixture_commit(view);
    commit(training);
}

/* The entries as they are stored; those whose scores are older than the newest eighth. */
static size_t count_stored(struct training *training, bool only_stale)
{
    struct model_store_entry entry = {.number = 0};
    struct model_view *view = NULL;
    size_t count = 0;
    assert_int_equal(model_view_open(training->model_store, &view, &training->error), STORE_OK);
    while (model_view_entry_after(view, entry.number, &entry, &training->error) == STORE_OK) {
        count += !only_stale || entry.scored < ENTRIES - ENTRIES / 8;
    }
    model_view_close(view);
    return count;
}

static void with_little_memory_all_stale_entries_are_scored_again_in_the_end(void **state)
{
    struct training *training = *state;
    training->settings.memory_bytes = TINY_BUDGET_BYTES;
    file_entries(training);
    start(training);
    assert_int_equal(learned(training), ENTRIES);
    while (size_of(training).stale > 0) {
        (void)sched_yield();
    }
    stop(training);
    assert_int_equal(count_stored(training, false), ENTRIES);
    assert_int_equal(count_stored(training, true), 0);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, training_set_up, training_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(with_little_memory_all_stale_entries_are_scored_again_in_the_end),
    };
    return cmocka_run_group_tests_name("trainer and stale entries", tests, NULL, NULL);
}
