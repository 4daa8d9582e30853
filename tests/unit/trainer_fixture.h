/*
 * trainer_fixture: a trainer at work on a store of its own, told of what was filed. Everything is
 * promised at once. Include cmocka.h first.
 */
#ifndef UNDERTAG_TESTS_TRAINER_FIXTURE_H
#define UNDERTAG_TESTS_TRAINER_FIXTURE_H

#include <pthread.h>
#include <unistd.h>

#include "daemon/model_base.h"
#include "daemon/trainer.h"
#include "tests/unit/store_fixture.h"

enum {
    HOUR_MS = 3600 * 1000,
    LARGE_BUDGET_BYTES = 1 << 30,
    GUARD_S = 120 /* a test that waits for what never comes ends */
};

struct training {
    struct fixture *store;
    struct store_settings model_settings; /* of the model's store */
    struct model_store *model_store;
    struct shared_model shared;
    struct backlog *backlog;
    struct troubles troubles;
    struct features_settings features;
    struct workspaces workspaces;
    struct moments *moments;
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

static inline void on_kept(void *user)
{
    struct training *training = user;
    (void)pthread_mutex_lock(&training->mutex);
    training->kept_count++;
    (void)pthread_cond_signal(&training->kept);
    (void)pthread_mutex_unlock(&training->mutex);
}

static inline void wait_until_kept(struct training *training, size_t count)
{
    (void)pthread_mutex_lock(&training->mutex);
    while (training->kept_count < count) {
        (void)pthread_cond_wait(&training->kept, &training->mutex);
    }
    (void)pthread_mutex_unlock(&training->mutex);
}

static const struct siphash_key TRAINING_KEY = {7, 8};

/* Opens the model's store, and takes up the model as it is stored there, if it is. */
static inline void open_model(struct training *training)
{
    struct model_origin origin = training->settings.origin;
    enum model_kept kept = MODEL_KEPT_NONE;
    struct model *model = NULL;
    uint64_t seq = 0;
    assert_int_equal(
        model_store_open(&training->model_settings, &training->model_store, &training->error),
        STORE_OK);
    origin.last_seq = fixture_totals(training->store).seq;
    assert_int_equal(
        model_keeper_look(training->model_store, &origin, &kept, &seq, &training->error), STORE_OK);
    assert_int_not_equal(kept, MODEL_KEPT_OTHER);
    assert_int_equal(model_new(&MODEL_SETTINGS, &TRAINING_KEY, &model), 0);
    if (kept == MODEL_KEPT_OURS) {
        assert_int_equal(model_keeper_load(training->model_store, model, &training->error),
                         STORE_OK);
    }
    assert_int_equal(shared_model_init_take(&training->shared, model, training->model_store, seq),
                     0);
    const struct backlog_start start = {.learned = seq, .committed = seq};
    assert_int_equal(backlog_new(&start, &training->backlog), 0);
    training->settings.model_store = training->model_store;
    training->settings.backlog = training->backlog;
}

static inline void close_model(struct training *training)
{
    shared_model_deinit(&training->shared);
    backlog_free(training->backlog);
    training->backlog = NULL;
    model_store_close(training->model_store);
    training->model_store = NULL;
}

static inline void open_parts(struct training *training)
{
    assert_int_equal(troubles_init(&training->troubles), 0);
    assert_int_equal(pthread_mutex_init(&training->mutex, NULL), 0);
    assert_int_equal(pthread_cond_init(&training->kept, NULL), 0);
    training->features = (struct features_settings){.title_weight = 1.5, .key = TRAINING_KEY};
    assert_int_equal(workspaces_init(&training->workspaces, &training->features), 0);
    assert_int_equal(moments_new(&training->moments), 0);
    training->model_settings = training->store->settings;
}

static inline int training_set_up(void **state)
{
    struct training *training = calloc(1, sizeof *training);
    assert_non_null(training);
    (void)alarm(GUARD_S);
    assert_int_equal(fixture_setup((void **)&training->store), 0);
    open_parts(training);
    training->settings = (struct trainer_settings){
        .store = training->store->store,
        .shared = &training->shared,
        .troubles = &training->troubles,
        .features = &training->features,
        .origin = {.store_uuid = store_uuid(training->store->store), .settings = "step=0.5\n"},
        .flush_every_ms = HOUR_MS,
        .flush_changes = 1000 * 1000,
        .memory_bytes = LARGE_BUDGET_BYTES,
        .workspaces = &training->workspaces,
        .moments = training->moments,
        .user = training,
        .kept = on_kept};
    open_model(training);
    *state = training;
    return 0;
}

static inline void start(struct training *training)
{
    assert_int_equal(trainer_new(&training->settings, &training->trainer), 0);
}

static inline void stop(struct training *training)
{
    backlog_stop(training->backlog);
    trainer_free(training->trainer);
    training->trainer = NULL;
}

static inline int training_tear_down(void **state)
{
    struct training *training = *state;
    if (training->backlog) {
        stop(training);
        close_model(training);
    }
    moments_free(training->moments);
    workspaces_deinit(&training->workspaces);
    troubles_deinit(&training->troubles);
    (void)pthread_cond_destroy(&training->kept);
    (void)pthread_mutex_destroy(&training->mutex);
    (void)fixture_teardown((void **)&training->store);
    free(training);
    return 0;
}

/* --- changes --- */

static inline void file(struct training *training, const char *id, const char *text)
{
    const struct names names = {.tags = {"weather"}};
    (void)fixture_file_as(training->store,
                          (struct item_filing){.id = text_of(id), .text = text_of(text)}, names);
}

/* Tells of all that was filed. */
static inline void commit(struct training *training)
{
    backlog_committed(training->backlog, fixture_totals(training->store).seq, 1000, 0);
}

/* Waits, since everything is promised at once. */
static inline uint64_t learned(struct training *training)
{
    backlog_wait_for_promise(training->backlog, 1);
    shared_model_read(&training->shared);
    uint64_t seq = training->shared.learned;
    shared_model_unlock(&training->shared);
    return seq;
}

static inline struct model_size size_of(struct training *training)
{
    struct model_size size;
    shared_model_read(&training->shared);
    model_measure(training->shared.model, &size);
    shared_model_unlock(&training->shared);
    return size;
}

#endif
