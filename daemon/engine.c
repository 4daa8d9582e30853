/*
 * Happy path: take the home's lock, open both environments, find out what is to be learned with,
 * load the model if it is one of this store and these settings (otherwise all items are learned
 * again), start trainer and writer, and go on with a rebuild that was under way.
 *
 * Failure paths: every step that fails closes what the steps before it have opened, in reverse.
 */
#include "daemon/engine_private.h"

#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/random.h>
#include <sysexits.h>
#include <unistd.h>

#include "daemon/home.h"
#include "daemon/log.h"

/* --- errors into exit codes ---------------------------------------------------------------------
 */

static int exit_code_of(enum store_code code)
{
    switch (code) {
    case STORE_NO_MEMORY:
        return EX_OSERR;
    case STORE_FULL:
        return EX_TEMPFAIL;
    case STORE_NEWER:
        return EX_CONFIG;
    case STORE_DENIED:
        return EX_NOPERM;
    default:
        return EX_IOERR;
    }
}

static int fail_store(char *error, const struct store_error *reason)
{
    (void)snprintf(error, ENGINE_ERROR_BYTES, "%s",
                   reason->text[0] ? reason->text : store_code_sentence(reason->code));
    return exit_code_of(reason->code);
}

static int fail_errno(char *error, const char *what, int code)
{
    (void)snprintf(error, ENGINE_ERROR_BYTES, "%s: %s", what, strerror(-code));
    return EX_OSERR;
}

/* --- the model ----------------------------------------------------------------------------------
 */

static struct model_origin origin_of(const struct engine *engine, uint64_t last_seq)
{
    return (struct model_origin){.store_uuid = store_uuid(engine->store),
                                 .settings = engine->learning.text,
                                 .last_seq = last_seq};
}

static int last_seq(struct engine *engine, uint64_t *ret_seq, struct store_error *error)
{
    struct store_view *view = NULL;
    int code = store_read(engine->store, &view, error);
    if (code == STORE_OK) {
        *ret_seq = store_view_totals(view).seq;
        store_end(view);
    }
    return code;
}

static int new_model(const struct engine *engine, struct model **ret_model,
                     struct store_error *error)
{
    const struct model_settings settings = options_model_settings(&engine->learning.used);
    if (model_new(&settings, &engine->features.key, ret_model) < 0) {
        return store_fail(error, STORE_NO_MEMORY, "there is no memory for a model");
    }
    return STORE_OK;
}

/* Starts over from the items, of which nothing is lost. */
static int relearn(struct engine *engine, const char *why, struct model **ret_model,
                   struct store_error *error)
{
    log_line(LOG_CAUTION, "%s: all items are learned again; until then answers are incomplete",
             why);
    int code = model_keeper_reset(engine->model_store, error);
    return code == STORE_OK ? new_model(engine, ret_model, error) : code;
}

static int load_model(struct engine *engine, uint64_t seq, struct model **ret_model,
                      uint64_t *ret_learned, struct store_error *error)
{
    const struct model_origin origin = origin_of(engine, seq);
    enum model_kept kept = MODEL_KEPT_NONE;
    struct model *model = NULL;
    int code = model_keeper_look(engine->model_store, &origin, &kept, ret_learned, error);
    if (code != STORE_OK) {
        return code;
    }
    if (kept == MODEL_KEPT_OTHER) {
        return relearn(engine, "the stored model was learned with other settings", ret_model,
                       error);
    }
    code = new_model(engine, &model, error);
    if (code == STORE_OK && kept == MODEL_KEPT_OURS) {
        code = model_keeper_load(engine->model_store, model, error);
    }
    if (code == STORE_OK) {
        *ret_model = model;
        return STORE_OK;
    }
    model_free(model);
    if (code == STORE_CORRUPT) {
        *error = (struct store_error){0};
        *ret_learned = 0;
        return relearn(engine, "the stored model is damaged", ret_model, error);
    }
    return code;
}

/* --- opening ------------------------------------------------------------------------------------
 */

static int prepare_settings(struct engine *engine, char *error)
{
    struct store_error reason = {0};
    if (learning_start(engine->store, engine->model_store, &engine->options, &engine->learning,
                       &reason) != STORE_OK) {
        return fail_store(error, &reason);
    }
    engine->features = options_features_settings(&engine->learning.used);
    if (getrandom(&engine->features.key, sizeof engine->features.key, 0) !=
        (ssize_t)sizeof engine->features.key) {
        return fail_errno(error, "there is no randomness", -errno);
    }
    return 0;
}

static int open_environments(struct engine *engine, const char *home, char *error)
{
    struct store_error reason = {0};
    engine->places = (struct store_settings){.home = home,
                                             .map_bytes = engine->options.map_size_bytes,
                                             .reserve_bytes = engine->options.disk_reserve_bytes};
    if (store_open(&engine->places, &engine->store, &reason) != STORE_OK) {
        return fail_store(error, &reason);
    }
    if (model_store_open(&engine->places, &engine->model_store, &reason) != STORE_OK) {
        store_close(engine->store);
        if (reason.code == STORE_CORRUPT) {
            size_t used = strlen(reason.text);
            (void)snprintf(reason.text + used, sizeof reason.text - used,
                           "; remove the folder model and start again: it is learned anew");
        }
        return fail_store(error, &reason);
    }
    return 0;
}

static int open_model(struct engine *engine, char *error)
{
    struct store_error reason = {0};
    struct model *model = NULL;
    uint64_t seq = 0;
    uint64_t learned = 0;
    if (last_seq(engine, &seq, &reason) != STORE_OK ||
        load_model(engine, seq, &model, &learned, &reason) != STORE_OK) {
        return fail_store(error, &reason);
    }
    int code = shared_model_init_take(&engine->shared, model, engine->model_store, learned);
    if (code < 0) {
        return fail_errno(error, "the model cannot be shared", code);
    }
    const struct backlog_start start = {.committed = seq,
                                        .learned = learned,
                                        .visible_within_ms = engine->options.visible_within_ms};
    code = backlog_new(&start, &engine->backlog);
    if (code < 0) {
        shared_model_deinit(&engine->shared);
        return fail_errno(error, "the backlog cannot be followed", code);
    }
    return 0;
}

static void on_kept(void *user)
{
    struct engine *engine = user;
    writer_wake(engine->writer);
}

static void on_words(void *user, const struct features_settings *words)
{
    struct engine *engine = user;
    workspaces_use(&engine->workspaces, words);
    writer_use_words(engine->writer, words);
}

static int make_rebuild(struct engine *engine)
{
    const struct rebuild_settings settings = {.store = engine->store,
                                              .places = engine->places,
                                              .backlog = engine->backlog,
                                              .troubles = &engine->troubles,
                                              .key = engine->features.key,
                                              .configured = engine->options,
                                              .start = engine->learning,
                                              .user = engine,
                                              .words = on_words,
                                              .let_go = on_kept};
    return rebuild_new(&settings, &engine->rebuild);
}

static int make_backup(struct engine *engine, const struct engine_settings *settings)
{
    const struct backup_settings backup = {.home = settings->home,
                                           .options = &engine->options,
                                           .store = engine->store,
                                           .shared = &engine->shared,
                                           .backlog = engine->backlog,
                                           .rebuild = engine->rebuild,
                                           .user = settings->user,
                                           .writer_user = engine,
                                           .let_go = on_kept,
                                           .done = settings->changes_done};
    return backup_new(&backup, &engine->backup);
}

static int start_threads(struct engine *engine, const struct engine_settings *settings)
{
    const struct writer_settings writer = {.store = engine->store,
                                           .backlog = engine->backlog,
                                           .troubles = &engine->troubles,
                                           .features = &engine->features,
                                           .user = settings->user,
                                           .done = settings->changes_done};
    const struct trainer_settings trainer = {.store = engine->store,
                                             .model_store = engine->model_store,
                                             .shared = &engine->shared,
                                             .backlog = engine->backlog,
                                             .troubles = &engine->troubles,
                                             .features = &engine->features,
                                             .origin = origin_of(engine, 0),
                                             .rebuild = engine->rebuild,
                                             .moments = engine->moments,
                                             .configured = engine->options,
                                             .flush_every_ms = engine->options.flush_every_ms,
                                             .flush_changes = engine->options.flush_changes,
                                             .rehearsal_share = engine->options.rehearsal_share,
                                             .memory_bytes = engine->options.memory_budget_bytes,
                                             .workspaces = &engine->workspaces,
                                             .user = engine,
                                             .kept = on_kept};
    int code = make_backup(engine, settings);
    if (code == 0) {
        code = writer_new(&writer, &engine->writer);
    }
    if (code < 0) {
        return code;
    }
    code = rebuild_resume(engine->rebuild);
    if (code == 0) {
        code = trainer_new(&trainer, &engine->trainer);
    }
    if (code < 0) {
        backlog_stop(engine->backlog);
        rebuild_stop(engine->rebuild);
        rebuild_free(engine->rebuild); /* it wakes the writer, so the writer goes after it */
        engine->rebuild = NULL;
        writer_free(engine->writer);
    }
    return code;
}

int engine_open(const struct engine_settings *settings, struct engine **ret_engine, char *error)
{
    struct engine *engine = calloc(1, sizeof *engine);
    if (!engine) {
        return fail_errno(error, "the daemon cannot start", -ENOMEM);
    }
    engine->options = *settings->options;
    int exit_code = 0;
    int code = home_open(settings->home, &engine->lock_fd, error);
    if (code < 0) {
        exit_code = code == -EWOULDBLOCK                ? EX_TEMPFAIL
                    : code == -EACCES || code == -EPERM ? EX_NOPERM
                                                        : EX_IOERR;
        goto fail_home;
    }
    exit_code = open_environments(engine, settings->home, error);
    if (exit_code != 0) {
        goto fail_environments;
    }
    exit_code = prepare_settings(engine, error);
    if (exit_code == 0) {
        exit_code = open_model(engine, error);
    }
    if (exit_code != 0) {
        goto fail_model;
    }
    code = troubles_init(&engine->troubles);
    if (code < 0) {
        exit_code = fail_errno(error, "the daemon cannot start", code);
        goto fail_troubles;
    }
    code = workspaces_init(&engine->workspaces, &engine->features);
    if (code < 0) {
        exit_code = fail_errno(error, "the daemon cannot start", code);
        goto fail_workspaces;
    }
    code = make_rebuild(engine);
    if (code < 0) {
        exit_code = fail_errno(error, "the daemon cannot start", code);
        goto fail_rebuild;
    }
    code = moments_new(&engine->moments);
    if (code < 0) {
        exit_code = fail_errno(error, "the daemon cannot start", code);
        goto fail_moments;
    }
    code = start_threads(engine, settings);
    if (code < 0) {
        exit_code = fail_errno(error, "a thread cannot be started", code);
        goto fail_threads;
    }
    *ret_engine = engine;
    return 0;
fail_threads:
    backup_free(engine->backup);
    moments_free(engine->moments);
fail_moments:
    rebuild_free(engine->rebuild);
fail_rebuild:
    workspaces_deinit(&engine->workspaces);
fail_workspaces:
    troubles_deinit(&engine->troubles);
fail_troubles:
    backlog_free(engine->backlog);
    shared_model_deinit(&engine->shared);
fail_model:
    model_store_close(engine->model_store);
    store_close(engine->store);
fail_environments:
    (void)close(engine->lock_fd); /* ends the lock; nothing is written there */
fail_home:
    free(engine);
    return exit_code;
}

int engine_close(struct engine *engine)
{
    if (!engine) {
        return 0;
    }
    moments_stop(engine->moments);
    backlog_stop(engine->backlog);
    rebuild_stop(engine->rebuild);
    backup_stop(engine->backup);
    backup_free(engine->backup);   /* it wakes the writer and bars rebuilds */
    trainer_free(engine->trainer); /* it wakes the writer, so the writer goes after it, */
    rebuild_free(engine->rebuild); /* as this does */
    writer_free(engine->writer);
    moments_free(engine->moments);
    workspaces_deinit(&engine->workspaces);
    troubles_deinit(&engine->troubles);
    backlog_free(engine->backlog);
    bool is_broken = store_is_broken(engine->store) || model_store_is_broken(engine->shared.store);
    model_store_close(engine->shared.store); /* not always that of the start */
    shared_model_deinit(&engine->shared);
    store_close(engine->store);
    (void)close(engine->lock_fd); /* ends the lock; nothing is written there */
    free(engine);
    return is_broken ? EX_IOERR : 0;
}
