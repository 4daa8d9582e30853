/* The one thread that changes the model: it follows what is committed, and stores what it knows. */
#include "daemon/trainer.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

#include "tests/unit/trainer_fixture.h"

/* --- learning --- */

static void what_is_committed_is_learned(void **state)
{
    struct training *training = *state;
    file(training, "log/1", "fog bell");
    file(training, "log/2", "fog lamp");
    commit(training);
    start(training);
    assert_int_equal(learned(training), 2);
    assert_int_equal(size_of(training).documents, 2);
    assert_int_equal(size_of(training).words, 3);
    file(training, "log/3", "quay");
    commit(training);
    assert_int_equal(learned(training), 3);
    assert_int_equal(size_of(training).words, 4);
    assert_int_equal(backlog_read(training->backlog).learned, 3);
}

static void more_changes_than_one_view_takes_are_learned(void **state)
{
    struct training *training = *state;
    for (int i = 0; i < 200; i++) {
        char id[16];
        (void)snprintf(id, sizeof id, "log/%d", i);
        file(training, id, "fog bell");
    }
    commit(training);
    start(training);
    assert_int_equal(learned(training), 200);
    assert_int_equal(size_of(training).documents, 200);
}

static void what_was_revised_or_withdrawn_is_unlearned(void **state)
{
    struct training *training = *state;
    file(training, "log/1", "fog bell");
    file(training, "log/2", "wreck");
    file(training, "log/1", "fog lamp");
    (void)fixture_withdraw(training->store, "log/2");
    commit(training);
    start(training);
    assert_int_equal(learned(training), 4);
    assert_int_equal(size_of(training).documents, 1);
    assert_int_equal(size_of(training).words, 2); /* fog and lamp */
}

/* A record that was superseded and passed is gone; its successor is learned all the same. */
static void a_change_that_was_erased_is_passed_over(void **state)
{
    struct training *training = *state;
    file(training, "log/1", "fog bell");
    file(training, "log/1", "fog lamp");
    assert_int_equal(fixture_erase(training->store, 2), 1);
    commit(training);
    start(training);
    assert_int_equal(learned(training), 2);
    assert_int_equal(size_of(training).documents, 1);
    assert_int_equal(size_of(training).words, 2);
}

/* Up to where the stored model has learned; 0: none is stored. */
static uint64_t stored(struct training *training)
{
    struct model_origin origin = training->settings.origin;
    enum model_kept kept = MODEL_KEPT_OTHER;
    uint64_t seq = 77;
    origin.last_seq = fixture_totals(training->store).seq;
    assert_int_equal(
        model_keeper_look(training->model_store, &origin, &kept, &seq, &training->error), STORE_OK);
    assert_int_equal(kept, seq > 0 ? MODEL_KEPT_OURS : MODEL_KEPT_NONE);
    return seq;
}

/* --- storing --- */

static void the_model_is_stored_after_so_many_changes(void **state)
{
    struct training *training = *state;
    training->settings.flush_changes = 2;
    file(training, "log/1", "fog bell");
    file(training, "log/2", "fog lamp");
    commit(training);
    start(training);
    wait_until_kept(training, 1);
    assert_int_equal(stored(training), 2);
    assert_int_equal(backlog_read(training->backlog).kept, 2);
}

static void the_model_is_stored_after_some_time(void **state)
{
    struct training *training = *state;
    training->settings.flush_every_ms = 1;
    file(training, "log/1", "fog bell");
    commit(training);
    start(training);
    wait_until_kept(training, 1);
    assert_int_equal(stored(training), 1);
}

static void the_model_is_stored_when_the_trainer_stops(void **state)
{
    struct training *training = *state;
    file(training, "log/1", "fog bell");
    commit(training);
    start(training);
    assert_int_equal(learned(training), 1);
    assert_int_equal(stored(training), 0);
    stop(training);
    assert_int_equal(stored(training), 1);
    assert_int_equal(training->kept_count, 1);
}

static void nothing_learned_is_nothing_to_store(void **state)
{
    struct training *training = *state;
    training->settings.flush_every_ms = 0;
    start(training);
    stop(training);
    assert_int_equal(training->kept_count, 0);
    assert_int_equal(stored(training), 0);
}

/* --- what goes wrong --- */

/* Changes one byte of a text in the store's file, which the open store sees at once. */
static void damage_text(struct training *training, const char *text)
{
    static char bytes[1 << 20];
    char path[FIXTURE_PATH_BYTES + 32];
    (void)snprintf(path, sizeof path, "%s/store/data.mdb", training->store->home);
    FILE *file = fopen(path, "r+b");
    assert_non_null(file);
    size_t size = fread(bytes, 1, sizeof bytes, file);
    char *found = memmem(bytes, size, text, strlen(text));
    assert_non_null(found);
    for (char *at = found; at;
         at = memmem(at + 1, size - (size_t)(at + 1 - bytes), text, strlen(text))) {
        assert_int_equal(fseek(file, at - bytes, SEEK_SET), 0);
        assert_int_not_equal(fputc(*at ^ 1, file), EOF);
    }
    assert_int_equal(fclose(file), 0);
}

static void a_damaged_change_stops_learning_for_good_and_nothing_else(void **state)
{
    struct training *training = *state;
    char sentence[TROUBLE_BYTES];
    file(training, "log/1", "fog bell");
    file(training, "log/2", "schoonerwreckage");
    file(training, "log/3", "fog lamp");
    damage_text(training, "schoonerwreckage");
    commit(training);
    start(training);
    assert_int_equal(learned(training), 1); /* nobody waits for more */
    troubles_read(&training->troubles, TROUBLE_LEARNING, sentence);
    assert_string_equal(sentence, "learning has stopped at change 1 (the record of change 2 is "
                                  "damaged); restart the daemon to go on");
    assert_true(backlog_wait_for_room(training->backlog) == UINT64_MAX);
    assert_false(training->shared.broken); /* what it knows may still be asked for */
    commit(training);
    stop(training);
    assert_int_equal(training->shared.learned, 1);
    assert_int_equal(stored(training), 0);
}

/* --- memory ---
 * The program itself and the caches want some 32 MiB, without a single tag. */

/* The least budget that it asks for, in MiB, having learned something; 0 where there is enough. */
static unsigned long wanted_with(struct training *training, uint64_t memory_mib)
{
    static const char ASKS[] = "set it to ";
    char sentence[TROUBLE_BYTES];
    training->settings.memory_bytes = memory_mib << 20U;
    file(training, "log/1", "fog bell");
    commit(training);
    start(training);
    assert_int_equal(learned(training), 1);
    troubles_read(&training->troubles, TROUBLE_MEMORY, sentence);
    const char *asks = strstr(sentence, ASKS);
    assert_true(asks || sentence[0] == '\0');
    return asks ? strtoul(asks + strlen(ASKS), NULL, 10) : 0;
}

static void a_budget_that_memory_outgrows_is_told_with_one_that_would_do(void **state)
{
    unsigned long wanted = wanted_with(*state, 16);
    assert_true(wanted > 32);
    assert_int_equal(training_tear_down(state), 0);
    assert_int_equal(training_set_up(state), 0);
    assert_int_equal(wanted_with(*state, wanted), 0);
}

static void the_smallest_budget_is_enough_for_a_few_tags(void **state)
{
    assert_int_equal(wanted_with(*state, 64), 0);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, training_set_up, training_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(what_is_committed_is_learned),
        TEST(more_changes_than_one_view_takes_are_learned),
        TEST(what_was_revised_or_withdrawn_is_unlearned),
        TEST(a_change_that_was_erased_is_passed_over),
        TEST(the_model_is_stored_after_so_many_changes),
        TEST(the_model_is_stored_after_some_time),
        TEST(the_model_is_stored_when_the_trainer_stops),
        TEST(nothing_learned_is_nothing_to_store),
        TEST(a_damaged_change_stops_learning_for_good_and_nothing_else),
        TEST(a_budget_that_memory_outgrows_is_told_with_one_that_would_do),
        TEST(the_smallest_budget_is_enough_for_a_few_tags),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
