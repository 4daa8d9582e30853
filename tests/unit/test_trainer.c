/* The one thread that changes the model: it follows what is committed, and stores what it knows. */
#include "daemon/trainer.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <pthread.h>
#include <sched.h>
#include <unistd.h>

#include "tests/unit/near.h"
#include "tests/unit/store_fixture.h"

enum {
    HOUR_MS = 3600 * 1000,
    GUARD_S = 120 /* a test that waits for what never comes ends */
};

struct training {
    struct fixture *store;
    struct model_store *model_store;
    struct shared_model shared;
    struct backlog *backlog;
    struct troubles troubles;
    struct features_settings features;
    struct trainer_settings settings;
    struct trainer *trainer;
    struct store_error error;
    pthread_mutex_t mutex;
    pthread_cond_t kept;
    size_t kept_count; /* under the mutex: how often the model was stored */
};

static const struct model_settings MODEL_SETTINGS = {
    .weights = {.surrogate = SURROGATE_SQUARED_HINGE},
    .curve = {.a = 0.55, .b = 1.5},
    .correction = true,
    .step = 0.5,
    .evidence_half_life_items = 50000.0,
    .shadow = true};

/* --- the fixture --- */

static void on_kept(void *user)
{
    struct training *training = user;
    (void)pthread_mutex_lock(&training->mutex);
    training->kept_count++;
    (void)pthread_cond_signal(&training->kept);
    (void)pthread_mutex_unlock(&training->mutex);
}

static void wait_until_kept(struct training *training, size_t count)
{
    (void)pthread_mutex_lock(&training->mutex);
    while (training->kept_count < count) {
        (void)pthread_cond_wait(&training->kept, &training->mutex);
    }
    (void)pthread_mutex_unlock(&training->mutex);
}

static void open_parts(struct training *training)
{
    static const struct siphash_key KEY = {7, 8};
    const struct backlog_start start = {.visible_within_ms = 0};
    struct model *model = NULL;
    assert_int_equal(
        model_store_open(&training->store->settings, &training->model_store, &training->error),
        STORE_OK);
    assert_int_equal(model_new(&MODEL_SETTINGS, &KEY, &model), 0);
    assert_int_equal(shared_model_init_take(&training->shared, model, 0), 0);
    assert_int_equal(backlog_new(&start, &training->backlog), 0);
    assert_int_equal(troubles_init(&training->troubles), 0);
    assert_int_equal(pthread_mutex_init(&training->mutex, NULL), 0);
    assert_int_equal(pthread_cond_init(&training->kept, NULL), 0);
    training->features = (struct features_settings){.title_weight = 1.5, .key = KEY};
}

static int set_up(void **state)
{
    struct training *training = calloc(1, sizeof *training);
    assert_non_null(training);
    (void)alarm(GUARD_S);
    assert_int_equal(fixture_setup((void **)&training->store), 0);
    open_parts(training);
    training->settings = (struct trainer_settings){
        .store = training->store->store,
        .model_store = training->model_store,
        .shared = &training->shared,
        .backlog = training->backlog,
        .troubles = &training->troubles,
        .features = &training->features,
        .origin = {.store_uuid = store_uuid(training->store->store), .settings = "step=0.5\n"},
        .flush_every_ms = HOUR_MS,
        .flush_changes = 1000 * 1000,
        .user = training,
        .kept = on_kept};
    *state = training;
    return 0;
}

static void start(struct training *training)
{
    assert_int_equal(trainer_new(&training->settings, &training->trainer), 0);
}

static void stop(struct training *training)
{
    backlog_stop(training->backlog);
    trainer_free(training->trainer);
    training->trainer = NULL;
}

static int tear_down(void **state)
{
    struct training *training = *state;
    stop(training);
    shared_model_deinit(&training->shared);
    backlog_free(training->backlog);
    troubles_deinit(&training->troubles);
    model_store_close(training->model_store);
    (void)pthread_cond_destroy(&training->kept);
    (void)pthread_mutex_destroy(&training->mutex);
    (void)fixture_teardown((void **)&training->store);
    free(training);
    return 0;
}

/* --- changes --- */

static void file(struct training *training, const char *id, const char *text)
{
    const struct names names = {.tags = {"weather"}};
    (void)fixture_file_as(training->store,
                          (struct item_filing){.id = text_of(id), .text = text_of(text)}, names);
}

/* Tells of all that was filed. */
static void commit(struct training *training)
{
    backlog_committed(training->backlog, fixture_totals(training->store).seq, 1000, 0);
}

/* Waits, since everything is promised at once. */
static uint64_t learned(struct training *training)
{
    backlog_wait_for_promise(training->backlog, 1);
    shared_model_read(&training->shared);
    uint64_t seq = training->shared.learned;
    shared_model_unlock(&training->shared);
    return seq;
}

static struct model_size size_of(struct training *training)
{
    struct model_size size;
    shared_model_read(&training->shared);
    model_measure(training->shared.model, &size);
    shared_model_unlock(&training->shared);
    return size;
}

/* The trials behind the propensities. */
static double trials_of(struct training *training)
{
    shared_model_read(&training->shared);
    double trials = model_fit(training->shared.model)->trials;
    shared_model_unlock(&training->shared);
    return trials;
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

/* --- what is said of items later --- */

/* An entry on weather, and one on casualties, so that both tags are there. */
static void file_two(struct training *training)
{
    file(training, "log/1", "fog bell");
    (void)fixture_file_as(training->store,
                          (struct item_filing){.id = text_of("log/2"), .text = text_of("wreck")},
                          (struct names){.tags = {"casualties"}});
}

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
    assert_int_equal(size_of(training).words, 3);
    assert_int_equal(size_of(training).listed, 2);
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
    assert_int_equal(size_of(training).words, 3);
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

static void a_check_of_a_chosen_item_tries_nothing(void **state)
{
    struct training *training = *state;
    file_two(training);
    (void)fixture_check(training->store, said_by("ann", "log/1"), false,
                        (struct names){.tags = {"weather", "casualties"}});
    commit(training);
    start(training);
    assert_int_equal(learned(training), 3);
    assert_near(trials_of(training), 0.0, 0.0);
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

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(what_is_committed_is_learned),
        TEST(more_changes_than_one_view_takes_are_learned),
        TEST(what_was_revised_or_withdrawn_is_unlearned),
        TEST(a_change_that_was_erased_is_passed_over),
        TEST(what_is_said_of_an_item_is_learned_with_it),
        TEST(a_ruling_on_a_filing_that_was_erased_is_learned_as_new),
        TEST(a_check_at_random_tries_what_belongs),
        TEST(a_check_of_a_chosen_item_tries_nothing),
        TEST(a_second_tagging_tries_by_halves),
        TEST(when_there_is_nothing_to_learn_stale_items_are_scored_again),
        TEST(what_was_scored_again_is_stored),
        TEST(the_model_is_stored_after_so_many_changes),
        TEST(the_model_is_stored_after_some_time),
        TEST(the_model_is_stored_when_the_trainer_stops),
        TEST(nothing_learned_is_nothing_to_store),
        TEST(a_damaged_change_stops_learning_for_good_and_nothing_else),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
