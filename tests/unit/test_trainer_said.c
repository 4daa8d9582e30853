/* The trainer with what is said of items after they were filed, and with the worklist. */
#include "daemon/trainer.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <sched.h>

#include "tests/unit/near.h"
#include "tests/unit/trainer_fixture.h"

/* The trials behind the propensities. */
static double trials_of(struct training *training)
{
    shared_model_read(&training->shared);
    double trials = model_fit(training->shared.model)->trials;
    shared_model_unlock(&training->shared);
    return trials;
}

/* --- what is said of items later --- */

/* An entry on weather, and one on casualties, so that both tags are there. */
static void file_two(struct training *training)
{
    file(training, "log/1", "fog bell");
    (void)fixture_file_as(training->store,
                          (struct item_filing){.id = text_of("log/2"), .text = text_of("fog bell")},
                          (struct names){.tags = {"casualties"}});
}

/* How many rulings said whether a chance held. */
static uint64_t ruled(struct training *training)
{
    struct reliability_row rows[RELIABILITY_CLASSES];
    uint64_t shown = 0;
    shared_model_read(&training->shared);
    standing_reliability(model_standing(training->shared.model), rows);
    shared_model_unlock(&training->shared);
    for (size_t i = 0; i < RELIABILITY_CLASSES; i++) {
        shown += rows[i].shown;
    }
    return shown;
}

/* As a ruling on what may be missing, since both entries have the same words. */
static void what_is_said_of_an_item_is_learned_with_it(void **state)
{
    struct training *training = *state;
    file_two(training);
    struct said said = fixture_rule(training->store, said_by("ann", "log/1"),
                                    (struct rulings){.belongs = {"casualties"}});
    assert_int_equal(said.result, STORE_OK);
    commit(training);
    start(training);
    assert_int_equal(learned(training), 3);
    assert_int_equal(size_of(training).documents, 2);
    assert_int_equal(size_of(training).words, 2);
    assert_int_equal(ruled(training), 1);
}

/* By the time it is learned, the filing that was ruled on is gone. */
static void a_ruling_on_a_filing_that_was_erased_is_learned_as_new(void **state)
{
    struct training *training = *state;
    file_two(training);
    (void)fixture_rule(training->store, said_by("ann", "log/1"),
                       (struct rulings){.belongs = {"casualties"}});
    assert_int_equal(fixture_erase(training->store, 3), 1);
    commit(training);
    start(training);
    assert_int_equal(learned(training), 3);
    assert_int_equal(size_of(training).documents, 2);
    assert_int_equal(size_of(training).words, 2);
}

/* The check goes through weather, which was given, and casualties, which was not. */
static void a_check_at_random_tries_what_belongs(void **state)
{
    struct training *training = *state;
    file_two(training);
    struct said said = fixture_check(training->store, said_by("ann", "log/1"), true,
                                     (struct names){.tags = {"weather", "casualties"}});
    assert_int_equal(said.result, STORE_OK);
    commit(training);
    start(training);
    assert_int_equal(learned(training), 3);
    assert_near(trials_of(training), 2.0, 0.0);
    (void)fixture_withdraw(training->store, "log/1");
    commit(training);
    assert_int_equal(learned(training), 4);
    assert_near(trials_of(training), 0.0, 0.0);
}

static size_t gaps_of(struct training *training, uint64_t seq)
{
    struct worklist_entry entry = {.number = 0};
    struct model_base base;
    shared_model_read(&training->shared);
    model_base_enter(&base, training->model_store);
    assert_int_equal(worklist_find(model_worklist(training->shared.model), &base.base, seq, &entry),
                     0);
    model_base_leave(&base);
    shared_model_unlock(&training->shared);
    return entry.gap_count;
}

/* The unchecked entry may lack the other tag, the checked one may not. */
static void a_check_of_a_chosen_item_tries_nothing_and_leaves_no_gap(void **state)
{
    struct training *training = *state;
    file_two(training);
    file(training, "log/3", "fog bell");
    file(training, "log/4", "fog bell");
    (void)fixture_check(training->store, said_by("ann", "log/4"), false,
                        (struct names){.tags = {"weather"}});
    commit(training);
    start(training);
    assert_int_equal(learned(training), 5);
    assert_near(trials_of(training), 0.0, 0.0);
    assert_int_equal(gaps_of(training, 3), 1);
    assert_int_equal(gaps_of(training, 5), 0);
}

/* Two taggers overlook the same things: half a trial each, given or not. */
static void a_second_tagging_tries_by_halves(void **state)
{
    struct training *training = *state;
    file_two(training);
    struct said said =
        fixture_tag_again(training->store, said_by("bea", "log/1"), "2031-05-04T03:02:01Z", false,
                          (struct names){.tags = {"weather", "casualties"}});
    assert_int_equal(said.result, STORE_OK);
    commit(training);
    start(training);
    assert_int_equal(learned(training), 3);
    assert_near(trials_of(training), 1.0, 0.0);
}

/* --- the worklist --- */

static void file_many(struct training *training, int count)
{
    for (int i = 0; i < count; i++) {
        char id[16];
        (void)snprintf(id, sizeof id, "log/%d", i);
        file(training, id, i % 2 ? "fog bell" : "fog lamp");
    }
    commit(training);
}

/* Scores older than the newest eighth are stale, until there is time. */
static void when_there_is_nothing_to_learn_stale_items_are_scored_again(void **state)
{
    struct training *training = *state;
    file_many(training, 40);
    start(training);
    assert_int_equal(learned(training), 40);
    while (size_of(training).stale > 0) {
        (void)sched_yield();
    }
    assert_int_equal(size_of(training).listed, 40);
}

static void what_was_scored_again_is_stored(void **state)
{
    struct training *training = *state;
    struct model *again = NULL;
    struct model_size size;
    const struct siphash_key key = {9, 9};
    training->settings.flush_changes = 40; /* what was learned is stored at once */
    file_many(training, 40);
    start(training);
    assert_int_equal(learned(training), 40);
    while (size_of(training).stale > 0) {
        (void)sched_yield();
    }
    stop(training);
    assert_int_equal(model_new(&MODEL_SETTINGS, &key, &again), 0);
    assert_int_equal(model_keeper_load(training->model_store, again, &training->error), STORE_OK);
    model_measure(again, &size);
    assert_int_equal(size.listed, 40);
    assert_int_equal(size.stale, 0);
    model_free(again);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, training_set_up, training_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(what_is_said_of_an_item_is_learned_with_it),
        TEST(a_ruling_on_a_filing_that_was_erased_is_learned_as_new),
        TEST(a_check_at_random_tries_what_belongs),
        TEST(a_check_of_a_chosen_item_tries_nothing_and_leaves_no_gap),
        TEST(a_second_tagging_tries_by_halves),
        TEST(when_there_is_nothing_to_learn_stale_items_are_scored_again),
        TEST(what_was_scored_again_is_stored),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
