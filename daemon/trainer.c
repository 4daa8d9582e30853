/*
 * Happy path: wait until something is committed behind what is learned; read a few changes in one
 * short view; take out the words of each and learn it under the lock; tell the backlog. Every now
 * and then the model is stored, which needs no lock, since this thread alone changes it.
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

#include "daemon/clock.h"
#include "daemon/grow.h"
#include "daemon/item_source.h"
#include "daemon/learner/model_parts.h"
#include "daemon/memory_shares.h"
#include "daemon/model_base.h"
#include "daemon/sync.h"
#include "storage/items.h"

enum {
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

/* One of the two items that a change is about, as the learner takes it. */
struct side {
    struct item_buffer buffer;
    struct item_record record;
    struct item_source source;
    struct features *features;
    struct model_trial *trials;
    size_t trial_capacity;
    struct model_item item;
};

struct trainer {
    struct trainer_settings settings;
    pthread_t thread;
    struct side filed;
    struct side replaced;
    struct model_scratch *scratch;
    struct model_base base; /* entered for a round */
    uint64_t learned;       /* this thread's own copy */
    uint64_t kept;          /* the seq of the stored model */
    uint64_t stored_at_us;  /* when it was stored, or tried, last */
    uint64_t storing_us;    /* how long that took */
    bool rescore_due;       /* the model has changed since there was nothing to score again */
    bool rescored;          /* since the model was stored */
    bool scrub_due;
    uint64_t scrub_wait_ms; /* before it is gone on with */
    size_t scrub_left;      /* pages, when it was last looked at */
    struct memory_shares shares;
    bool failed;
    bool store_failed; /* when the model was stored last */
};

/* --- one change ---------------------------------------------------------------------------------
 */

/* Looks at whether what belongs was given: a whole one after a check at random, halves where there
 * are second taggers. */
static size_t list_trials(const struct item_record *record, struct model_trial *into)
{
    enum {
        WHOLE = 2,
        HALF = 1
    };
    size_t count = 0;
    const struct item_check *check = &record->check;
    for (size_t i = 0; check->is_random && i < check->given.count; i++) {
        into[count++] = (struct model_trial){check->given.list[i], WHOLE, WHOLE};
    }
    for (size_t i = 0; check->is_random && i < check->hidden.count; i++) {
        into[count++] = (struct model_trial){check->hidden.list[i], WHOLE, 0};
    }
    for (size_t i = 0; i < record->second_count; i++) {
        struct numbers tags = record->seconds[i].tags;
        for (size_t j = 0; j < tags.count; j++) {
            bool was_given = numbers_hold(record->filed, tags.list[j]) &&
                             !numbers_hold(record->prompted, tags.list[j]);
            into[count++] = (struct model_trial){tags.list[j], HALF, was_given ? HALF : 0};
        }
    }
    return count;
}

static size_t most_trials(const struct item_record *record)
{
    size_t most = record->check.given.count + record->check.hidden.count;
    for (size_t i = 0; i < record->second_count; i++) {
        most += record->seconds[i].tags.count;
    }
    return most;
}

/* The item as the learner takes it, of the record and the features. */
static int fill_item(struct side *side, struct store_error *error)
{
    const struct item_record *record = &side->record;
    if (GROW(&side->trials, &side->trial_capacity, most_trials(record)) < 0) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    /* A check goes through the tags of its day; those opened later are as before. */
    bool is_checked = record->check.is_there;
    side->item = (struct model_item){.number = record->seq,
                                     .features = features_list(side->features),
                                     .feature_count = features_count(side->features),
                                     .tags = record->tags.list,
                                     .tag_count = record->tags.count,
                                     .examined = record->examined.list,
                                     .examined_count = record->examined.count,
                                     .known_not = record->known_not.list,
                                     .known_not_count = record->known_not.count,
                                     .checked_below = is_checked ? record->check.vocabulary : 0,
                                     .same_words = record->change != ITEM_FILED,
                                     .trials = side->trials,
                                     .trial_count = list_trials(record, side->trials)};
    return STORE_OK;
}

/* Reads a record and takes out its features; *ret_found says whether it is an item. */
static int read_side(struct side *side, struct store_view *view, uint64_t seq, bool *ret_found,
                     struct store_error *error)
{
    int code = items_read(view, seq, &side->buffer, &side->record, error);
    if (code == STORE_NOT_FOUND) {
        *error = (struct store_error){0}; /* superseded, and passed before */
        *ret_found = false;
        return STORE_OK;
    }
    if (code != STORE_OK) {
        return code;
    }
    *ret_found = !item_is_withdrawn(&side->record);
    if (!*ret_found) {
        return STORE_OK;
    }
    code = item_source_fill(&side->source, &side->record);
    if (code == 0) {
        code = features_extract(side->features, &side->source.source, SIZE_MAX);
    }
    if (code != 0) {
        return store_fail(error, code == -ENOMEM ? STORE_NO_MEMORY : STORE_CORRUPT,
                          "the words of change %llu cannot be taken out", (unsigned long long)seq);
    }
    return fill_item(side, error);
}

static int fail_to_learn(const struct trainer *trainer, int code, uint64_t seq,
                         struct store_error *error)
{
    if (code == -ENOMEM) {
        return store_fail(error, STORE_NO_MEMORY, "there is no memory to learn change %llu",
                          (unsigned long long)seq);
    }
    const struct store_error *reason = &trainer->base.error;
    return store_fail(error, STORE_CORRUPT, "what was learned before cannot be read: %s",
                      reason->text[0] ? reason->text : "it does not fit together");
}

static int learn_change(struct trainer *trainer, struct store_view *view, uint64_t seq,
                        uint64_t *ret_cost, struct store_error *error)
{
    bool is_filed = false;
    bool is_replaced = false;
    trainer->filed.record = (struct item_record){0};
    int code = read_side(&trainer->filed, view, seq, &is_filed, error);
    if (code == STORE_OK && trainer->filed.record.replaced > 0) {
        code = read_side(&trainer->replaced, view, trainer->filed.record.replaced, &is_replaced,
                         error);
    }
    if (code != STORE_OK) {
        return code;
    }
    struct shared_model *shared = trainer->settings.shared;
    shared_model_write(shared);
    if (is_filed || is_replaced) {
        code = model_learn(shared->model, is_filed ? &trainer->filed.item : NULL,
                           is_replaced ? &trainer->replaced.item : NULL, trainer->scratch);
        model_trim(shared->model, trainer->shares.dictionary, trainer->shares.weights);
    }
    if (code == 0) {
        shared->learned = seq;
    } else {
        shared->broken = true;
    }
    shared_model_unlock(shared);
    const struct item_record *record = &trainer->filed.record;
    *ret_cost = backlog_cost(record->title.size + record->text.size, record->filed.count);
    return code == 0 ? STORE_OK : fail_to_learn(trainer, code, seq, error);
}

static void wait_for_store(struct trainer *trainer, const struct store_error *error)
{
    troubles_begin(trainer->settings.troubles, TROUBLE_LEARNING,
                   "learning waits for the store (%s)", error->text);
    backlog_pause(trainer->settings.backlog, IDLE_MS);
}

/* --- memory -------------------------------------------------------------------------------------
 */

static void share_memory(struct trainer *trainer)
{
    struct model_size size;
    model_measure(trainer->settings.shared->model, &size);
    uint64_t taken = size.counts_bytes + model_scratch_bytes(trainer->scratch) +
                     workspaces_bytes(trainer->settings.workspaces);
    trainer->shares = memory_shares_of(trainer->settings.memory_bytes, taken);
}

/* Whether the model must be stored before more is learned. */
static bool is_full(const struct trainer *trainer)
{
    return model_changed_bytes(trainer->settings.shared->model) > trainer->shares.changed;
}

static void enter_base(struct trainer *trainer)
{
    model_base_enter(&trainer->base, trainer->settings.model_store);
    model_scratch_read(trainer->scratch, &trainer->base.base);
}

/* Learns changes up to `last`, as many as one short view allows. */
static int learn_some(struct trainer *trainer, uint64_t last, struct store_error *error)
{
    struct store_view *view = NULL;
    int code = store_read(trainer->settings.store, &view, error);
    if (code != STORE_OK) {
        wait_for_store(trainer, error); /* no change was skipped */
        return STORE_OK;
    }
    uint64_t begun_us = clock_steady_us();
    share_memory(trainer);
    enter_base(trainer);
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
    model_base_leave(&trainer->base);
    store_end(view);
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
    uint64_t changes = trainer->learned - trainer->kept + (trainer->rescored ? 1 : 0);
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
    trainer->rescored = false;
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
    bool is_filed = false;
    int code = read_side(&trainer->filed, view, number, &is_filed, error);
    if (code != STORE_OK) {
        return code;
    }
    /* Nobody else changes the model: scoring needs no lock. */
    int result =
        is_filed ? model_rescore(shared->model, &trainer->filed.item, trainer->scratch, &entry) : 0;
    if (result == 0) {
        shared_model_write(shared);
        result = is_filed ? model_relist(shared->model, &trainer->base.base, &entry)
                          : model_delist(shared->model, &trainer->base.base, number);
        shared_model_unlock(shared);
    }
    return result == 0 ? STORE_OK : fail_to_learn(trainer, result, number, error);
}

/* Scores again, while there is time, what the model has outgrown; says whether there is more. */
static bool rescore_some(struct trainer *trainer)
{
    struct store_error error = {0};
    struct store_view *view = NULL;
    if (store_read(trainer->settings.store, &view, &error) != STORE_OK) {
        return false; /* learning will tell, if it lasts */
    }
    uint64_t number = 0;
    int next = 0;
    int code = STORE_OK;
    enter_base(trainer);
    for (size_t i = 0; i < RESCORED_A_ROUND && code == STORE_OK && next == 0; i++) {
        next = model_next_stale(trainer->settings.shared->model, &trainer->base.base, &number);
        if (next == 0) {
            code = rescore_item(trainer, view, number, &error);
            trainer->rescored = true;
        }
    }
    model_base_leave(&trainer->base);
    store_end(view);
    return code == STORE_OK && next == 0 && !is_full(trainer);
}

/* --- the thread ---------------------------------------------------------------------------------
 */

static void fail(struct trainer *trainer, const struct store_error *error)
{
    trainer->failed = true;
    troubles_begin(trainer->settings.troubles, TROUBLE_LEARNING,
                   "learning has stopped at change %llu (%s); restart the daemon to go on",
                   (unsigned long long)trainer->learned, error->text);
    backlog_trainer_failed(trainer->settings.backlog);
}

/* How long to wait for work: until the model is to be stored, if anything is to be stored. */
static uint64_t idle_ms(const struct trainer *trainer)
{
    if (trainer->rescore_due) {
        return 0;
    }
    if (trainer->learned == trainer->kept) {
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
        bool must_wait = is_full(trainer); /* what was learned could not be stored */
        if (must_wait) {
            backlog_pause(backlog, IDLE_MS);
        }
        if (!is_idle && !must_wait && learn_some(trainer, last, &error) != STORE_OK) {
            fail(trainer, &error);
        }
        trainer->rescore_due = !trainer->failed && (is_idle ? trainer->rescore_due : true);
        if (is_idle && trainer->rescore_due) {
            trainer->rescore_due = rescore_some(trainer);
        }
        if (is_store_due(trainer) && !trainer->failed) {
            store_model(trainer);
        } else if (is_idle && trainer->scrub_due) {
            scrub(trainer);
        }
    }
    if ((trainer->learned > trainer->kept || trainer->rescored) && !trainer->failed) {
        store_model(trainer);
    }
    finish_scrubbing(trainer);
    return NULL;
}

/* --- life ---------------------------------------------------------------------------------------
 */

static void side_deinit(struct side *side)
{
    item_buffer_deinit(&side->buffer);
    item_source_deinit(&side->source);
    features_free(side->features);
    free(side->trials);
}

static void free_trainer(struct trainer *trainer)
{
    side_deinit(&trainer->filed);
    side_deinit(&trainer->replaced);
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
    trainer->shares = memory_shares_of(settings->memory_bytes, 0);
    trainer->learned = settings->shared->learned;
    trainer->kept = settings->shared->learned;
    trainer->rescore_due = true;
    trainer->scrub_due = true; /* a crash may have come between forgetting and overwriting */
    int code = features_new(settings->features, &trainer->filed.features);
    if (code == 0) {
        code = features_new(settings->features, &trainer->replaced.features);
    }
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
