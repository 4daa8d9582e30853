/*
 * Happy path: wait until something is committed behind what is learned; read a few changes in one
 * short view; take out the words of each and learn it under the lock; tell the backlog. Every now
 * and then the model is stored (trainer_storing). When there is nothing to learn, stale entries of
 * the worklist are scored again, then items rehearsed.
 *
 * Failure paths: a change that cannot be read or learned ends learning for good, until a restart: a
 * model that has skipped a change would differ from its items for ever. The daemon goes on filing
 * and asking. A store that cannot be looked into, and what cannot be overwritten, is tried again
 * after a while.
 */
#include "daemon/trainer.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/clock.h"
#include "daemon/learner/model_parts.h"
#include "daemon/log.h"
#include "daemon/sync.h"
#include "daemon/trainer_private.h"

enum {
    CHANGES_A_VIEW = 64,
    IDLE_MS = 1000,
    HELD_BACK_MS = 50,
    TRY_AGAIN_MS = 5000,
    FINISH_MS = 3000,      /* the longest time that stopping spends on overwriting */
    SCRUB_PAGES = 1024,    /* overwritten at a time */
    ROUND_LIMIT_US = 20000 /* a view that has been open this long is given up */
};

/* --- one change ---------------------------------------------------------------------------------
 */

int trainer_fail_to_learn(struct trainer *trainer, int code, uint64_t seq,
                          struct store_error *error)
{
    if (code == -ENOMEM) {
        return store_fail(error, STORE_NO_MEMORY, "there is no memory to learn change %llu",
                          (unsigned long long)seq);
    }
    const struct store_error *reason = &trainer->base.error;
    trainer->is_damaged = reason->code == STORE_OK || reason->code == STORE_CORRUPT;
    return store_fail(error, STORE_CORRUPT, "what was learned before cannot be read: %s",
                      reason->text[0] ? reason->text : "it does not fit together");
}

static int learn_change(struct trainer *trainer, struct store_view *view, uint64_t seq,
                        uint64_t *ret_cost, struct store_error *error)
{
    struct change_read read;
    int code = change_reader_read(trainer->reader, view, seq, &read, error);
    if (code != STORE_OK) {
        return code;
    }
    struct shared_model *shared = trainer->settings.shared;
    shared_model_write(shared);
    if (read.item || read.replaced) {
        code = model_learn(shared->model, read.item, read.replaced, trainer->scratch);
        model_trim(shared->model, trainer->shares.dictionary, trainer->shares.weights);
    }
    if (code == 0) {
        shared->learned = seq;
    } else {
        shared->broken = code;
    }
    shared_model_unlock(shared);
    *ret_cost = read.cost;
    return code == 0 ? STORE_OK : trainer_fail_to_learn(trainer, code, seq, error);
}

static void wait_for_store(struct trainer *trainer, const struct store_error *error)
{
    troubles_begin(trainer->settings.troubles, TROUBLE_LEARNING,
                   "learning waits for the store (%s)", error->text);
    backlog_pause(trainer->settings.backlog, IDLE_MS);
}

/* --- a round ------------------------------------------------------------------------------------
 */

/* What is kept of each tag lies in memory whatever the budget: then more is wanted of it. */
static void look_at_budget(struct trainer *trainer, const struct model_size *size, uint64_t taken)
{
    const struct trainer_settings *settings = &trainer->settings;
    uint64_t least = memory_shares_least_budget(taken + size->weights_tag_bytes);
    if (settings->memory_bytes >= least) {
        troubles_end(settings->troubles, TROUBLE_MEMORY);
        return;
    }
    troubles_begin(
        settings->troubles, TROUBLE_MEMORY,
        "memory_budget is too small for %llu tags: %llu MiB are kept of them, and memory "
        "grows beyond the budget; set it to %llu MiB or more",
        (unsigned long long)size->tags,
        (unsigned long long)(taken + size->weights_tag_bytes) >> 20U,
        (unsigned long long)(least >> 20U) + 1);
}

static void share_memory(struct trainer *trainer)
{
    const struct trainer_settings *settings = &trainer->settings;
    struct model_size size;
    model_measure(settings->shared->model, &size);
    uint64_t taken = size.counts_bytes + model_scratch_bytes(trainer->scratch) +
                     workspaces_bytes(settings->workspaces);
    look_at_budget(trainer, &size, taken);
    taken += moments_bytes(settings->moments);
    taken += settings->rebuild ? rebuild_memory_bytes(settings->rebuild) : 0;
    trainer->shares = memory_shares_of(settings->memory_bytes, taken);
}

int trainer_begin_round(struct trainer *trainer, struct store_view **ret_view,
                        struct store_error *error)
{
    int code = store_read(trainer->settings.store, ret_view, error);
    if (code == STORE_OK) {
        share_memory(trainer);
        model_base_enter(&trainer->base, trainer->settings.model_store);
        model_scratch_read(trainer->scratch, &trainer->base.base);
    }
    return code;
}

void trainer_end_round(struct trainer *trainer, struct store_view *view)
{
    model_base_leave(&trainer->base);
    store_end(view);
}

/* Learns changes up to `last`, as many as one short view allows. */
static int learn_some(struct trainer *trainer, uint64_t last, struct store_error *error)
{
    struct store_view *view = NULL;
    int code = trainer_begin_round(trainer, &view, error);
    if (code != STORE_OK) {
        wait_for_store(trainer, error); /* no change was skipped */
        return STORE_OK;
    }
    uint64_t begun_us = clock_steady_us();
    for (size_t i = 0; i < CHANGES_A_VIEW && trainer->learned < last; i++) {
        uint64_t before_us = clock_steady_us();
        uint64_t cost = 0;
        code = learn_change(trainer, view, trainer->learned + 1, &cost, error);
        if (code != STORE_OK) {
            break;
        }
        uint64_t after_us = clock_steady_us();
        trainer->learned++;
        backlog_learned(trainer->settings.backlog, trainer->learned, cost, after_us - before_us);
        if (after_us - begun_us > ROUND_LIMIT_US || trainer_is_full(trainer)) {
            break;
        }
    }
    trainer_end_round(trainer, view);
    if (code == STORE_OK) {
        troubles_end(trainer->settings.troubles, TROUBLE_LEARNING);
    }
    return code;
}

/* --- scrubbing ----------------------------------------------------------------------------------
 */

/* Forgotten words leave the file, too, a stretch at a time while there is nothing else to do. */
static void scrub(struct trainer *trainer)
{
    struct store_error error = {0};
    size_t left = 0;
    if (model_store_scrub(trainer->settings.model_store, SCRUB_PAGES, &left, &error) != STORE_OK) {
        troubles_begin(trainer->settings.troubles, TROUBLE_FORGETTING,
                       "forgotten words may still be in the model's file (%s)", error.text);
        trainer->scrub_wait_ms = TRY_AGAIN_MS;
        return;
    }
    if (left == 0) {
        troubles_end(trainer->settings.troubles, TROUBLE_FORGETTING);
    }
    /* What does not get less is held by a reader, who will be gone soon. */
    bool is_held = left >= trainer->scrub_left && trainer->scrub_left > 0;
    trainer->scrub_wait_ms = is_held ? HELD_BACK_MS : 0;
    trainer->scrub_left = left;
    trainer->scrub_due = left > 0;
}

/* --- the thread ---------------------------------------------------------------------------------
 */

/* What was learned before is damaged, and loading it would not find out: it is to be learned anew.
 * Nobody may ask any more, since there is nothing left to read. */
static void give_up_stored(struct trainer *trainer)
{
    struct store_error reason = {0};
    trainer_end_storing(trainer, true);
    shared_model_write(trainer->settings.shared);
    trainer->settings.shared->broken = -EIO;
    shared_model_unlock(trainer->settings.shared);
    int code = model_keeper_reset(trainer->settings.model_store, &reason);
    log_line(LOG_CAUTION, "the stored model is damaged: %s",
             code == STORE_OK ? "a restart learns all items again"
                              : "stop the daemon and remove the folder model");
}

void trainer_fail(struct trainer *trainer, const struct store_error *error)
{
    trainer->failed = true;
    if (trainer->is_damaged) {
        give_up_stored(trainer);
    }
    troubles_begin(trainer->settings.troubles, TROUBLE_LEARNING,
                   "learning has stopped at change %llu (%s); restart the daemon to go on",
                   (unsigned long long)trainer->learned, error->text);
    backlog_trainer_failed(trainer->settings.backlog);
}

/* A model that was built anew takes the place of this one, if one is ready. */
static void take_over(struct trainer *trainer)
{
    struct trainer_settings *settings = &trainer->settings;
    const struct rebuild_trainer offered = {
        .learned = trainer->learned, .reader = &trainer->reader, .text = trainer->text};
    if (!settings->rebuild || trainer->failed || trainer->is_storing || trainer->moment.store ||
        moments_are_held(settings->moments) ||
        !rebuild_take_over(settings->rebuild, settings->shared, &offered)) {
        return;
    }
    settings->model_store = settings->shared->store;
    settings->origin.settings = trainer->text;
    trainer->kept = trainer->learned;
    trainer->sealed_at_us = clock_steady_us();
    trainer->idly_changed = false;
    trainer->rescore_due = true;
    trainer->rehearse_due = settings->rehearsal_share > 0.0;
    trainer->scrub_due = true;
    trainer->scrub_left = 0;
    backlog_kept(settings->backlog, trainer->kept);
    settings->kept(settings->user);
}

/* How long to wait for work: until the model is to be stored, if anything is to be stored. */
static uint64_t idle_ms(const struct trainer *trainer)
{
    if (trainer->rescore_due) {
        return 0;
    }
    if (trainer->rehearse_due) {
        uint64_t now_us = clock_steady_us();
        return now_us < trainer->rest_until_us ? (trainer->rest_until_us - now_us) / 1000 + 1 : 0;
    }
    if (trainer->is_storing) {
        return IDLE_MS; /* its end is a nudge */
    }
    if (trainer->learned == trainer->kept && !trainer->idly_changed) {
        return trainer->scrub_due ? trainer->scrub_wait_ms : IDLE_MS;
    }
    uint64_t most_ms = trainer->settings.flush_every_ms;
    return most_ms < IDLE_MS ? most_ms : IDLE_MS;
}

/* What was forgotten shall not wait in the file for the next start. */
static void finish_scrubbing(struct trainer *trainer)
{
    uint64_t last_us = clock_steady_us() + FINISH_MS * 1000ULL;
    trainer->scrub_wait_ms = 0;
    while (trainer->scrub_due && trainer->scrub_wait_ms < TRY_AGAIN_MS &&
           clock_steady_us() < last_us) {
        scrub(trainer);
    }
}

/* What was learned could not be stored, and there is no room for more. */
static bool must_wait(struct trainer *trainer)
{
    if (trainer_is_full(trainer)) {
        trainer_end_storing(trainer, true); /* that may make room */
    }
    if (trainer_is_full(trainer)) { /* by what was learned meanwhile */
        trainer_store_if_due(trainer);
        trainer_end_storing(trainer, true);
    }
    bool waits = trainer_is_full(trainer);
    if (waits != trainer->waits) {
        trainer->waits = waits;
        backlog_trainer_waits(trainer->settings.backlog, waits);
    }
    return waits;
}

static void *run(void *argument)
{
    struct trainer *trainer = argument;
    struct backlog *backlog = trainer->settings.backlog;
    trainer->sealed_at_us = clock_steady_us();
    while (!backlog_is_stopping(backlog)) {
        struct store_error error = {0};
        uint64_t behind = trainer->failed ? UINT64_MAX : trainer->learned;
        uint64_t last =
            trainer_bound(trainer, backlog_wait_for_work(backlog, behind, idle_ms(trainer)));
        bool is_idle = last <= behind;
        trainer_end_storing(trainer, false);
        if (must_wait(trainer)) {
            backlog_pause(backlog, IDLE_MS);
        } else if (!is_idle && learn_some(trainer, last, &error) != STORE_OK) {
            trainer_fail(trainer, &error);
        }
        trainer_work_idly(trainer, is_idle);
        trainer_make_moment(trainer);
        take_over(trainer);
        trainer_store_if_due(trainer);
        if (is_idle && trainer->scrub_due && !trainer->is_storing) {
            scrub(trainer);
        }
    }
    trainer_drop_moment(trainer);
    trainer_store_last(trainer);
    finish_scrubbing(trainer);
    return NULL;
}

/* --- life ---------------------------------------------------------------------------------------
 */

static void free_trainer(struct trainer *trainer)
{
    storer_free(trainer->storer);
    change_reader_free(trainer->reader);
    model_scratch_free(trainer->scratch);
    free(trainer);
}

int trainer_new(const struct trainer_settings *settings, struct trainer **ret_trainer)
{
    struct trainer *trainer = calloc(1, sizeof *trainer);
    if (!trainer) {
        return -ENOMEM;
    }
    trainer->settings = *settings;
    trainer->learned = settings->shared->learned;
    trainer->kept = settings->shared->learned;
    trainer->rescore_due = true;
    trainer->rehearse_due = settings->rehearsal_share > 0.0;
    trainer->shares = memory_shares_of(settings->memory_bytes, 0);
    trainer->scrub_due = true; /* a crash may have come between forgetting and overwriting */
    int code = change_reader_new(settings->features, &trainer->reader);
    if (code == 0) {
        code = model_scratch_new(&trainer->scratch);
    }
    if (code == 0) {
        code = storer_new(settings->backlog, &trainer->storer);
    }
    if (code == 0) {
        code = -pthread_create(&trainer->thread, NULL, run, trainer);
    }
    if (code < 0) {
        free_trainer(trainer);
        return code;
    }
    *ret_trainer = trainer;
    return 0;
}

void trainer_free(struct trainer *trainer)
{
    if (!trainer) {
        return;
    }
    sync_join(trainer->thread);
    free_trainer(trainer);
}
