/*
 * The model into its store, while learning goes on: this thread, which alone changes the model,
 * collects a copy of what has changed; the storer commits it. What was collected stays in memory,
 * sealed, until it is durable, so that whoever asks finds it there whether the commit has come or
 * not.
 *
 * A model that cannot be stored (a full disk) is tried again with the next flush.
 */
#include <malloc.h>

#include "daemon/clock.h"
#include "daemon/learner/model_parts.h"
#include "daemon/trainer_private.h"

enum {
    TRY_AGAIN_US = 1000000, /* where there is no room to learn more meanwhile */
    FLUSH_SHARE = 10,       /* storing takes a tenth of the time at most */
    COPIED_FLUSHES = 10,    /* while it is copied, it is stored this many times more seldom */
    SMALL_BUDGET = 256 << 20
};

static uint64_t changed_bytes(const struct trainer *trainer)
{
    return model_changed_bytes(trainer->settings.shared->model);
}

bool trainer_is_full(const struct trainer *trainer)
{
    return changed_bytes(trainer) > trainer->shares.changed;
}

/* What is stored while a backup copies the model can take no page that the copy needs, so the file
 * grows by all of it. */
static uint64_t patience(const struct trainer *trainer)
{
    return backlog_is_held(trainer->settings.backlog, BACKLOG_BACKUP) ? COPIED_FLUSHES : 1;
}

static bool is_due(const struct trainer *trainer)
{
    uint64_t waited_us = clock_steady_us() - trainer->sealed_at_us;
    uint64_t changes = trainer->learned - trainer->kept + (trainer->idly_changed ? 1 : 0);
    if (trainer->failed || trainer->is_storing) {
        return false;
    }
    /* Half of what has room: the other half is for what changes while it is stored. */
    if (changed_bytes(trainer) > trainer->shares.changed / 2) {
        return !trainer->store_failed || waited_us >= TRY_AGAIN_US;
    }
    return changes > 0 && waited_us >= FLUSH_SHARE * trainer->storing_us &&
           (waited_us >= patience(trainer) * trainer->settings.flush_every_ms * 1000 ||
            changes >= patience(trainer) * trainer->settings.flush_changes);
}

static void tell_failure(struct trainer *trainer, const struct store_error *error)
{
    trainer->store_failed = true;
    troubles_begin(trainer->settings.troubles, TROUBLE_KEEPING,
                   "what was learned cannot be stored (%s); a restart will learn it again",
                   error->text);
}

/* Copies what has changed. The model tells it apart from what changes from here on. */
static int seal(struct trainer *trainer, struct model_store_writing **ret_writing,
                struct store_error *error)
{
    struct shared_model *shared = trainer->settings.shared;
    int code = model_keeper_collect(trainer->settings.model_store, shared->model,
                                    &trainer->settings.origin, trainer->learned, ret_writing,
                                    &trainer->forgot, error);
    if (code != STORE_OK) {
        return code;
    }
    shared_model_write(shared);
    code = model_seal(shared->model);
    shared_model_unlock(shared);
    for (bool more = code == 0; more;) {
        shared_model_write(shared);
        more = model_seal_words(shared->model);
        shared_model_unlock(shared);
    }
    if (code < 0) {
        model_store_abort(*ret_writing);
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    return STORE_OK;
}

void trainer_begin_storing(struct trainer *trainer)
{
    struct store_error error = {0};
    struct model_store_writing *writing = NULL;
    trainer->sealed_at_us = clock_steady_us();
    if (seal(trainer, &writing, &error) != STORE_OK) {
        tell_failure(trainer, &error);
        return;
    }
    trainer->sealed = trainer->learned;
    trainer->idly_changed = false;
    trainer->is_storing = true;
    storer_begin(trainer->storer, writing);
}

void trainer_store_if_due(struct trainer *trainer)
{
    /* A moment has it stored soon. */
    if (is_due(trainer) && (!trainer_nears_moment(trainer) || trainer_is_full(trainer))) {
        trainer_begin_storing(trainer);
    }
}

static void note_stored(struct trainer *trainer)
{
    struct shared_model *shared = trainer->settings.shared;
    for (bool more = true; more;) {
        shared_model_write(shared);
        more = model_stored(shared->model);
        shared_model_unlock(shared);
    }
    /* The pages that storing took lie in holes now; with a small budget they are a good part of it.
     */
    if (trainer->settings.memory_bytes <= SMALL_BUDGET) {
        (void)malloc_trim(0); /* says only whether there was something */
    }
    troubles_end(trainer->settings.troubles, TROUBLE_KEEPING);
    trainer->store_failed = false;
    trainer->kept = trainer->sealed;
    trainer->scrub_due = trainer->scrub_due || trainer->forgot;
    backlog_kept(trainer->settings.backlog, trainer->kept);
    trainer->settings.kept(trainer->settings.user);
}

void trainer_end_storing(struct trainer *trainer, bool waits)
{
    struct storer_result result;
    if (!storer_take(trainer->storer, waits, &result)) {
        return;
    }
    trainer->is_storing = false;
    trainer->storing_us = result.took_us;
    if (result.code == STORE_OK) {
        note_stored(trainer);
    } else {
        trainer->idly_changed = true; /* perhaps; what is sealed must go at any rate */
        tell_failure(trainer, &result.error);
    }
}

void trainer_store_last(struct trainer *trainer)
{
    trainer_end_storing(trainer, true);
    if ((trainer->learned > trainer->kept || trainer->idly_changed) && !trainer->failed) {
        trainer_begin_storing(trainer);
        trainer_end_storing(trainer, true);
    }
}
