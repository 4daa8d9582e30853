/*
 * Happy path: wait until something is committed behind what is learned; read a few changes in one
 * short view; take out the words of each and learn it under the lock; tell the backlog. Every now
 * and then the model is stored, which needs no lock, since this thread alone changes it. When there
 * is nothing to learn, stale entries of the worklist are scored again, then items rehearsed.
 *
 * Failure paths: a model that cannot be stored (a full disk) is tried again with the next flush. A
 * change that cannot be read or learned ends learning for good, until a restart: a model that has
 * skipped a change would differ from its items for ever. The daemon goes on filing and asking. A
 * store that cannot be looked into, and what cannot be overwritten, is tried again after a while.
 */
#include "daemon/trainer.h"

#include <errno.h>
#include <pthread.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/change_reader.h"
#include "daemon/clock.h"
#include "daemon/learner/model_parts.h"
#include "daemon/log.h"
#include "daemon/memory_shares.h"
#include "daemon/model_base.h"
#include "daemon/sync.h"

enum {
    REHEARSAL_US = 1000, /* then it looks for changes again */
    CHANGES_A_VIEW = 64,
    IDLE_MS = 1000,
    HELD_BACK_MS = 50,
    TRY_AGAIN_MS = 5000,
    FINISH_MS = 3000,      /* the longest time that stopping spends on overwriting */
    FLUSH_SHARE = 10,      /* storing takes a tenth of the time at most */
    SCRUB_PAGES = 1024,    /* overwritten at a time */
    RESCORED_A_ROUND = 16, /* items of the worklist, before it looks for changes again */
    ROUND_LIMIT_US = 20000 /* a view that has been open this long is given up */
};

struct trainer {
    struct trainer_settings settings;
    char text[MODEL_STORE_SETTINGS_BYTES]; /* the origin's, once the model is a rebuilt one */
    pthread_t thread;
    struct change_reader *reader;
    struct model_scratch *scratch;
    struct model_base base; /* entered for a round */
    struct memory_shares shares;
    uint64_t learned;      /* this thread's own copy */
    uint64_t kept;         /* the seq of the stored model */
    uint64_t stored_at_us; /* when it was stored, or tried, last */
    uint64_t storing_us;   /* how long that took */
    bool rescore_due;      /* the model has changed since there was nothing to score again */
    bool idly_changed;     /* by scoring again or rehearsal, since the model was stored */
    bool rehearse_due;
    uint64_t rest_until_us; /* rehearsal takes no more than its share */
    bool scrub_due;
    uint64_t scrub_wait_ms; /* before it is gone on with */
    size_t scrub_left;      /* pages, when it was last looked at */
    bool failed;
    bool store_failed; /* when the model was to be stored last */
    bool waits;        /* until it can be stored */
    bool is_damaged;   /* what is stored of the model */
};

/* --- one change ---------------------------------------------------------------------------------
 */

static int fail_to_learn(struct trainer *trainer, int code, uint64_t seq, struct store_error *error)
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
    return code == 0 ? STORE_OK : fail_to_learn(trainer, code, seq, error);
}

static void wait_for_store(struct trainer *trainer, const struct store_error *error)
{
    troubles_begin(trainer->settings.troubles, TROUBLE_LEARNING,
                   "learning waits for the store (%s)", error->text);
    backlog_pause(trainer->settings.backlog, IDLE_MS);
}

/* --- a round ------------------------------------------------------------------------------------
 */

static void share_memory(struct trainer *trainer)
{
    const struct trainer_settings *settings = &trainer->settings;
    struct model_size size;
    model_measure(settings->shared->model, &size);
    uint64_t taken = size.counts_bytes + model_scratch_bytes(trainer->scratch) +
                     workspaces_bytes(settings->workspaces);
    if (settings->rebuild && rebuild_is_running(settings->rebuild)) {
        taken += settings->memory_bytes / REBUILD_MEMORY_PART;
    }
    trainer->shares = memory_shares_of(settings->memory_bytes, taken);
}

/* Whether the model must be stored before more is learned. */
static bool is_full(const struct trainer *trainer)
{
    return model_changed_bytes(trainer->settings.shared->model) > trainer->shares.changed;
}

/* Opens what a round reads. The model and its store fit together until end_round. */
static int begin_round(struct trainer *trainer, struct store_view **ret_view,
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

static void end_round(struct trainer *trainer, struct store_view *view)
{
    model_base_leave(&trainer->base);
    store_end(view);
}

/* Learns changes up to `last`, as many as one short view allows. */
static int learn_some(struct trainer *trainer, uint64_t last, struct store_error *error)
{
    struct store_view *view = NULL;
    int code = begin_round(trainer, &view, error);
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
        if (after_us - begun_us > ROUND_LIMIT_US || is_full(trainer)) {
            break;
        }
    }
    end_round(trainer, view);
    if (code == STORE_OK) {
        troubles_end(trainer->settings.troubles, TROUBLE_LEARNING);
    }
    return code;
}

/* --- storing the model --------------------------------------------------------------------------
 */

static bool is_store_due(const struct trainer *trainer)
{
    uint64_t waited_us = clock_steady_us() - trainer->stored_at_us;
    uint64_t changes = trainer->learned - trainer->kept + (trainer->idly_changed ? 1 : 0);
    if (is_full(trainer)) {
        return !trainer->store_failed || waited_us >= IDLE_MS * 1000ULL;
    }
    return changes > 0 && waited_us >= FLUSH_SHARE * trainer->storing_us &&
           (waited_us >= trainer->settings.flush_every_ms * 1000 ||
            changes >= trainer->settings.flush_changes);
}

static void store_model(struct trainer *trainer)
{
    struct store_error error = {0};
    uint64_t begun_us = clock_steady_us();
    bool forgot = false;
    int code = model_keeper_store(trainer->settings.model_store, trainer->settings.shared->model,
                                  &trainer->settings.origin, trainer->learned, &forgot, &error);
    trainer->stored_at_us = clock_steady_us();
    trainer->storing_us = trainer->stored_at_us - begun_us;
    trainer->store_failed = code != STORE_OK;
    if (code != STORE_OK) {
        troubles_begin(trainer->settings.troubles, TROUBLE_KEEPING,
                       "what was learned cannot be stored (%s); a restart will learn it again",
                       error.text);
        return;
    }
    shared_model_write(trainer->settings.shared);
    model_clean(trainer->settings.shared->model);
    shared_model_unlock(trainer->settings.shared);
    troubles_end(trainer->settings.troubles, TROUBLE_KEEPING);
    trainer->kept = trainer->learned;
    trainer->idly_changed = false;
    trainer->scrub_due = trainer->scrub_due || forgot;
    backlog_kept(trainer->settings.backlog, trainer->kept);
    trainer->settings.kept(trainer->settings.user);
}

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

/* --- the worklist -------------------------------------------------------------------------------
 */

/* Scores one item again; an entry whose item cannot be read any more leaves the worklist. */
static int rescore_item(struct trainer *trainer, struct store_view *view, uint64_t number,
                        struct store_error *error)
{
    struct shared_model *shared = trainer->settings.shared;
    struct worklist_entry entry;
    const struct model_item *item = NULL;
    int code = change_reader_item(trainer->reader, view, number, &item, error);
    if (code != STORE_OK) {
        return code;
    }
    /* Nobody else changes the model: scoring needs no lock. */
    int result = item ? model_rescore(shared->model, item, trainer->scratch, &entry) : 0;
    if (result == 0) {
        const struct base *base = &trainer->base.base;
        shared_model_write(shared);
        result = item ? model_relist(shared->model, base, &entry)
                      : model_delist(shared->model, base, number);
        shared_model_unlock(shared);
    }
    return result == 0 ? STORE_OK : fail_to_learn(trainer, result, number, error);
}

/* Scores again, while there is time, what the model has outgrown; says whether there is more. */
static bool rescore_some(struct trainer *trainer)
{
    struct store_error error = {0};
    struct store_view *view = NULL;
    if (begin_round(trainer, &view, &error) != STORE_OK) {
        return false; /* learning will tell, if it lasts */
    }
    uint64_t number = 0;
    int next = 0;
    int code = STORE_OK;
    for (size_t i = 0; i < RESCORED_A_ROUND && code == STORE_OK && next == 0; i++) {
        next = model_next_stale(trainer->settings.shared->model, &trainer->base.base, &number);
        if (next == 0) {
            code = rescore_item(trainer, view, number, &error);
            trainer->idly_changed = true;
        }
    }
    end_round(trainer, view);
    return code == STORE_OK && next == 0;
}

/* --- rehearsal ----------------------------------------------------------------------------------
 */

/* Whose turn it is; -ENOENT for nobody's. */
static int next_rehearsal(struct trainer *trainer, uint64_t *ret_number)
{
    struct shared_model *shared = trainer->settings.shared;
    shared_model_write(shared);
    int result = model_next_rehearsal(shared->model, &trainer->base.base, ret_number);
    shared_model_unlock(shared);
    return result;
}

static int rehearse_item(struct trainer *trainer, struct store_view *view, uint64_t number,
                         struct store_error *error)
{
    struct shared_model *shared = trainer->settings.shared;
    const struct model_item *item = NULL;
    int code = change_reader_item(trainer->reader, view, number, &item, error);
    if (code != STORE_OK) {
        return code;
    }
    int result = 0;
    shared_model_write(shared);
    if (item) {
        result = model_rehearse(shared->model, item, trainer->scratch);
        model_trim(shared->model, trainer->shares.dictionary, trainer->shares.weights);
        shared->broken = result;
    } else {
        model_skip_rehearsal(shared->model, number);
    }
    shared_model_unlock(shared);
    return result == 0 ? STORE_OK : fail_to_learn(trainer, result, number, error);
}

/* Rehearses for a moment, and rests for as long as its share asks for. Says in *ret_more whether
 * there is more. */
static int rehearse_some(struct trainer *trainer, bool *ret_more, struct store_error *error)
{
    struct store_view *view = NULL;
    uint64_t begun_us = clock_steady_us();
    uint64_t now_us = begun_us;
    uint64_t number = 0;
    int next = 0;
    *ret_more = false;
    if (begin_round(trainer, &view, error) != STORE_OK) {
        *error = (struct store_error){0}; /* learning will tell, if it lasts */
        return STORE_OK;
    }
    int code = STORE_OK;
    while (code == STORE_OK && next == 0 && now_us - begun_us < REHEARSAL_US && !is_full(trainer)) {
        next = next_rehearsal(trainer, &number);
        if (next == 0) {
            code = rehearse_item(trainer, view, number, error);
            trainer->idly_changed = true;
        }
        now_us = clock_steady_us();
    }
    end_round(trainer, view);
    double share = trainer->settings.rehearsal_share;
    trainer->rest_until_us = now_us + (uint64_t)((double)(now_us - begun_us) * (1.0 / share - 1.0));
    *ret_more = next == 0;
    return code;
}

static bool may_rehearse(const struct trainer *trainer)
{
    return trainer->rehearse_due && !trainer->rescore_due && !is_full(trainer) &&
           clock_steady_us() >= trainer->rest_until_us;
}

/* --- the thread ---------------------------------------------------------------------------------
 */

static void fail(struct trainer *trainer, const struct store_error *error)
{
    struct store_error reason = {0};
    trainer->failed = true;
    /* What was learned before is damaged, and loading it would not find out: learn it anew. */
    if (trainer->is_damaged) {
        int code = model_keeper_reset(trainer->settings.model_store, &reason);
        log_line(LOG_CAUTION, "the stored model is damaged: %s",
                 code == STORE_OK ? "a restart learns all items again"
                                  : "stop the daemon and remove the folder model");
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
    if (!settings->rebuild || trainer->failed ||
        !rebuild_take_over(settings->rebuild, settings->shared, &offered)) {
        return;
    }
    settings->model_store = settings->shared->store;
    settings->origin.settings = trainer->text;
    trainer->kept = trainer->learned;
    trainer->stored_at_us = clock_steady_us();
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
    bool waits = is_full(trainer);
    if (waits != trainer->waits) {
        trainer->waits = waits;
        backlog_trainer_waits(trainer->settings.backlog, waits);
    }
    return waits;
}

/* What can be done while there is nothing to learn; anything learned makes all of it due. */
static void work_idly(struct trainer *trainer, bool is_idle)
{
    struct store_error error = {0};
    if (trainer->failed || !is_idle) {
        trainer->rescore_due = !trainer->failed;
        trainer->rehearse_due = !trainer->failed && trainer->settings.rehearsal_share > 0.0;
        return;
    }
    if (is_full(trainer)) {
        return;
    }
    if (trainer->rescore_due) {
        trainer->rescore_due = rescore_some(trainer);
    } else if (may_rehearse(trainer) &&
               rehearse_some(trainer, &trainer->rehearse_due, &error) != STORE_OK) {
        fail(trainer, &error);
    }
}

static void *run(void *argument)
{
    struct trainer *trainer = argument;
    struct backlog *backlog = trainer->settings.backlog;
    trainer->stored_at_us = clock_steady_us();
    while (!backlog_is_stopping(backlog)) {
        struct store_error error = {0};
        uint64_t behind = trainer->failed ? UINT64_MAX : trainer->learned;
        uint64_t last = backlog_wait_for_work(backlog, behind, idle_ms(trainer));
        bool is_idle = last <= behind;
        if (must_wait(trainer)) {
            backlog_pause(backlog, IDLE_MS);
        } else if (!is_idle && learn_some(trainer, last, &error) != STORE_OK) {
            fail(trainer, &error);
        }
        work_idly(trainer, is_idle);
        take_over(trainer);
        if (is_store_due(trainer) && !trainer->failed) {
            store_model(trainer);
        } else if (is_idle && trainer->scrub_due) {
            scrub(trainer);
        }
    }
    if ((trainer->learned > trainer->kept || trainer->idly_changed) && !trainer->failed) {
        store_model(trainer);
    }
    finish_scrubbing(trainer);
    return NULL;
}

/* --- life ---------------------------------------------------------------------------------------
 */

static void free_trainer(struct trainer *trainer)
{
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
