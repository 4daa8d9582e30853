/*
 * Happy path: take what is queued, up to a group; wait until the trainer is near enough; make all
 * changes in one view, erase some of what the stored model has passed, and commit; hand the changes
 * back. While nothing is queued, erase the rest, and overwrite what that left in the file.
 *
 * Failure paths: a change that is refused (an unknown tag, no such item) has changed nothing, and
 * the group goes on without it. When the view itself fails, the group has changed nothing; the
 * changes are then tried one by one, so that a large or a damaged one does not take the others with
 * it. What cannot be erased or overwritten is tried again after a while.
 */
#include "daemon/writer.h"

#include <errno.h>
#include <pthread.h>
#include <stdlib.h>

#include "daemon/clock.h"
#include "daemon/sync.h"

enum {
    GROUP_CHANGES = 256,
    ERASED_A_COMMIT = 256,
    SCRUB_PAGES = 1024,
    HELD_BACK_MS = 50,
    TRY_AGAIN_MS = 5000,
    FINISH_MS = 3000 /* the longest time that stopping spends on overwriting */
};

#define WAIT_FOR_EVER UINT64_MAX

struct change_list {
    struct change *first;
    struct change *last;
};

struct writer {
    struct writer_settings settings;
    pthread_t thread;
    struct features *features; /* to count words with */
    struct codec_writer record;
    uint64_t erased; /* what the model's seq was when there was nothing left to erase */
    bool scrub_due;
    size_t scrub_left; /* pages, when it was last looked at */

    pthread_mutex_t mutex;
    pthread_cond_t wake;
    struct change_list queued; /* below: under the mutex */
    struct change_list done;
    struct features *other_words; /* to count with from now on; NULL: no others */
    bool woken;
    bool stopping;
};

static void append(struct change_list *list, struct change *change)
{
    change->next = NULL;
    if (list->last) {
        list->last->next = change;
    } else {
        list->first = change;
    }
    list->last = change;
}

/* --- one change ---------------------------------------------------------------------------------
 */

/* What learning the change will take, as far as it can be told before it is made. */
static uint64_t cost_of(const struct change *change)
{
    return backlog_cost(change->filing.title.size + change->filing.text.size,
                        change->filing.tag_count);
}

static void take_other_words(struct writer *writer)
{
    sync_lock(&writer->mutex);
    struct features *other = writer->other_words;
    writer->other_words = NULL;
    sync_unlock(&writer->mutex);
    if (other) {
        features_free(writer->features);
        writer->features = other;
    }
}

static bool has_too_many_words(struct writer *writer, const struct change *change)
{
    return change->counted &&
           features_extract(writer->features, change->counted, change->words_limit) == -E2BIG;
}

/* Whether the view may be gone on with. */
static bool is_change_alone(enum store_code code)
{
    return code == STORE_OK || code == STORE_REFUSED || code == STORE_NOT_FOUND;
}

static int make_change(struct writer *writer, struct store_view *view, struct change *change)
{
    const struct item_filing *filing = &change->filing;
    const struct item_saying saying = {
        .id = filing->id, .who = filing->tagger, .at_ms = filing->stored_at_ms, .uid = filing->uid};
    const struct item_names tags = {.names = filing->tags, .count = filing->tag_count};
    const struct item_names declined = {.names = filing->declined, .count = filing->declined_count};
    switch (change->kind) {
    case CHANGE_FILE:
        return items_file(view, filing, &writer->record, &change->filed, &change->refusal,
                          &change->error);
    case CHANGE_WITHDRAW:
        return items_withdraw(view, filing->id, filing->stored_at_ms, filing->uid, &writer->record,
                              &change->filed.seq, &change->error);
    case CHANGE_RULE:
        return items_rule(view, &saying, tags, declined, &writer->record, &change->filed,
                          &change->refusal, &change->error);
    case CHANGE_CHECK:
        return items_check(view, &saying, tags, change->is_random, &writer->record, &change->filed,
                           &change->checked, &change->refusal, &change->error);
    case CHANGE_TAG_AGAIN:
        return items_tag_again(view, &saying, tags, filing->filed_at, filing->open_unknown,
                               &writer->record, &change->filed, &change->refusal, &change->error);
    }
    return store_fail(&change->error, STORE_CORRUPT, "a change of no kind");
}

/* A change may be tried twice: what an earlier try has found is gone. */
static void forget_outcome(struct change *change)
{
    free(change->checked.missed);
    free(change->checked.extra);
    change->checked = (struct item_checked){0};
    change->error = (struct store_error){0};
}

static enum store_code apply(struct writer *writer, struct store_view *view, struct change *change)
{
    forget_outcome(change);
    change->code = change->has_too_many_words ? STORE_REFUSED
                                              : (enum store_code)make_change(writer, view, change);
    return change->code;
}

/* --- a group ------------------------------------------------------------------------------------
 */

static void tell_trouble(struct writer *writer, const struct store_error *error)
{
    troubles_begin(writer->settings.troubles, TROUBLE_STORING, "changes cannot be stored (%s)",
                   error->text[0] ? error->text : store_code_sentence(error->code));
}

static void tell_erasing(struct writer *writer, const struct store_error *error)
{
    troubles_begin(writer->settings.troubles, TROUBLE_ERASING,
                   "what was withdrawn or revised may still be in the store's file (%s)",
                   error->text);
}

/* Erases some of what the stored model has passed, along with a group. Damage there is told, and
 * keeps no change back: nothing was erased then. */
static int erase_along(struct writer *writer, struct store_view *view, size_t *ret_erased,
                       struct store_error *error)
{
    uint64_t kept = backlog_read(writer->settings.backlog).kept;
    int code = store_erase_passed(view, kept, ERASED_A_COMMIT, ret_erased, error);
    if (code != STORE_CORRUPT) {
        return code;
    }
    tell_erasing(writer, error);
    *error = (struct store_error){0};
    return STORE_OK;
}

/* Makes all changes of the group durable, or none; returns the code that stopped it. */
static enum store_code commit(struct writer *writer, struct change *group,
                              struct store_error *error)
{
    struct store_view *view = NULL;
    if (store_write(writer->settings.store, &view, error) != STORE_OK) {
        return error->code;
    }
    uint64_t before = store_view_totals(view).seq;
    uint64_t cost = 0;
    for (struct change *change = group; change; change = change->next) {
        if (!is_change_alone(apply(writer, view, change))) {
            *error = change->error;
            error->code = change->code;
            store_end(view);
            return error->code;
        }
        bool is_new = change->code == STORE_OK && change->filed.seq > before;
        cost += is_new ? backlog_cost(change->filed.text_bytes, change->filed.tag_count) : 0;
    }
    uint64_t after = store_view_totals(view).seq;
    if (after == before) {
        store_end(view);
        return STORE_OK;
    }
    size_t erased = 0;
    if (erase_along(writer, view, &erased, error) != STORE_OK) {
        store_end(view);
        return error->code;
    }
    if (store_commit(view, error) != STORE_OK) {
        return error->code;
    }
    writer->scrub_due = writer->scrub_due || erased > 0;
    troubles_end(writer->settings.troubles, TROUBLE_STORING);
    backlog_committed(writer->settings.backlog, after, cost, clock_steady_ms());
    return STORE_OK;
}

/* Commits the group; one that could not be committed is refused as a whole. */
static enum store_code commit_or_refuse(struct writer *writer, struct change *group)
{
    struct store_error error = {0};
    enum store_code code = commit(writer, group, &error);
    if (code != STORE_OK) {
        tell_trouble(writer, &error);
    }
    for (struct change *change = group; change && code != STORE_OK; change = change->next) {
        change->code = code;
        change->error = error;
    }
    return code;
}

static void commit_one_by_one(struct writer *writer, struct change *group)
{
    while (group) {
        struct change *rest = group->next;
        group->next = NULL;
        (void)commit_or_refuse(writer, group); /* its outcome is in the change */
        group->next = rest;
        group = rest;
    }
}

static void hand_back(struct writer *writer, struct change *group)
{
    sync_lock(&writer->mutex);
    while (group) {
        struct change *next = group->next;
        append(&writer->done, group);
        group = next;
    }
    sync_unlock(&writer->mutex);
    writer->settings.done(writer->settings.user);
}

/* Takes as many changes as cost no more than `room`, one at least. */
static struct change *take_group(struct writer *writer, uint64_t room)
{
    struct change_list group = {0};
    uint64_t cost = 0;
    sync_lock(&writer->mutex);
    for (size_t i = 0; i < GROUP_CHANGES && writer->queued.first; i++) {
        struct change *change = writer->queued.first;
        cost += cost_of(change);
        if (i > 0 && cost > room) {
            break;
        }
        writer->queued.first = change->next;
        append(&group, change);
    }
    if (!writer->queued.first) {
        writer->queued.last = NULL;
    }
    sync_unlock(&writer->mutex);
    return group.first;
}

static void commit_next_group(struct writer *writer)
{
    uint64_t room = backlog_wait_for_room(writer->settings.backlog);
    struct change *group = take_group(writer, room);
    take_other_words(writer);
    for (struct change *change = group; change; change = change->next) {
        change->has_too_many_words = has_too_many_words(writer, change);
    }
    enum store_code code = commit_or_refuse(writer, group);
    if (code != STORE_OK && code != STORE_BROKEN) {
        commit_one_by_one(writer, group);
    }
    hand_back(writer, group);
}

/* --- erasing ------------------------------------------------------------------------------------
 */

/* Erases some of what the stored model has passed; says how long to wait before going on. */
static uint64_t erase_some(struct writer *writer, uint64_t kept)
{
    struct store_error error = {0};
    struct store_view *view = NULL;
    size_t erased = 0;
    if (store_write(writer->settings.store, &view, &error) != STORE_OK) {
        tell_erasing(writer, &error);
        return TRY_AGAIN_MS;
    }
    int code = store_erase_passed(view, kept, ERASED_A_COMMIT, &erased, &error);
    if (code != STORE_OK || erased == 0) {
        store_end(view);
    } else {
        code = store_commit(view, &error);
        writer->scrub_due = true;
    }
    if (code != STORE_OK) {
        tell_erasing(writer, &error);
        return TRY_AGAIN_MS;
    }
    if (erased < ERASED_A_COMMIT) {
        writer->erased = kept;
    }
    return 0;
}

/* Overwrites some of what was erased; says how long to wait before going on. */
static uint64_t scrub_some(struct writer *writer)
{
    struct store_error error = {0};
    size_t before = writer->scrub_left;
    writer->scrub_left = 0;
    if (store_scrub(writer->settings.store, SCRUB_PAGES, &writer->scrub_left, &error) != STORE_OK) {
        tell_erasing(writer, &error);
    }
    writer->scrub_due = writer->scrub_left > 0;
    if (!writer->scrub_due) {
        return WAIT_FOR_EVER;
    }
    /* What does not get less is held by a reader, who will be gone soon. */
    return writer->scrub_left >= before && before > 0 ? HELD_BACK_MS : 0;
}

/* A stretch of work that has time; says how long to wait before the next, WAIT_FOR_EVER: none. */
static uint64_t keep_up(struct writer *writer)
{
    uint64_t kept = backlog_read(writer->settings.backlog).kept;
    if (kept != writer->erased) {
        return erase_some(writer, kept);
    }
    return writer->scrub_due ? scrub_some(writer) : WAIT_FOR_EVER;
}

/* --- the thread ---------------------------------------------------------------------------------
 */

/* Waits for something to do, `most_ms` at most. False when there is nothing left and the writer is
 * to stop. */
static bool wait_for_changes(struct writer *writer, uint64_t most_ms, bool *ret_queued)
{
    struct timespec deadline = sync_deadline(most_ms == WAIT_FOR_EVER ? 0 : most_ms);
    struct heartbeat *heartbeat = backlog_heartbeat(writer->settings.backlog);
    int code = 0;
    heartbeat_rest(heartbeat, HEART_WRITER);
    sync_lock(&writer->mutex);
    while (!writer->queued.first && !writer->woken && !writer->stopping && code == 0) {
        code = most_ms == WAIT_FOR_EVER
                   ? pthread_cond_wait(&writer->wake, &writer->mutex)
                   : pthread_cond_timedwait(&writer->wake, &writer->mutex, &deadline);
    }
    writer->woken = false;
    *ret_queued = writer->queued.first != NULL;
    bool goes_on = *ret_queued || !writer->stopping;
    sync_unlock(&writer->mutex);
    heartbeat_work(heartbeat, HEART_WRITER);
    return goes_on;
}

/* What was withdrawn shall not wait in the file for the next start. */
static void finish_erasing(struct writer *writer)
{
    uint64_t last_ms = clock_steady_ms() + FINISH_MS;
    while (keep_up(writer) < TRY_AGAIN_MS && clock_steady_ms() < last_ms) {
    }
}

static void *run(void *argument)
{
    struct writer *writer = argument;
    uint64_t wait_ms = 0;
    bool is_queued = false;
    while (wait_for_changes(writer, wait_ms, &is_queued)) {
        if (is_queued) {
            commit_next_group(writer);
            wait_ms = 0;
        } else {
            wait_ms = keep_up(writer);
        }
    }
    finish_erasing(writer);
    return NULL;
}

/* --- life ---------------------------------------------------------------------------------------
 */

static int init_queue(struct writer *writer)
{
    int code = -pthread_mutex_init(&writer->mutex, NULL);
    if (code < 0) {
        return code;
    }
    code = sync_init_condition(&writer->wake);
    if (code < 0) {
        (void)pthread_mutex_destroy(&writer->mutex); /* nobody knows it yet */
    }
    return code;
}

static void deinit_queue(struct writer *writer)
{
    (void)pthread_cond_destroy(&writer->wake); /* nobody waits any more */
    (void)pthread_mutex_destroy(&writer->mutex);
}

int writer_new(const struct writer_settings *settings, struct writer **ret_writer)
{
    struct writer *writer = calloc(1, sizeof *writer);
    if (!writer) {
        return -ENOMEM;
    }
    writer->settings = *settings;
    writer->scrub_due = true; /* a crash may have come between erasing and overwriting */
    int code = features_new(settings->features, &writer->features);
    if (code < 0) {
        goto fail_features;
    }
    code = init_queue(writer);
    if (code < 0) {
        goto fail_queue;
    }
    code = -pthread_create(&writer->thread, NULL, run, writer);
    if (code < 0) {
        goto fail_thread;
    }
    *ret_writer = writer;
    return 0;
fail_thread:
    deinit_queue(writer);
fail_queue:
    features_free(writer->features);
fail_features:
    free(writer);
    return code;
}

void writer_free(struct writer *writer)
{
    if (!writer) {
        return;
    }
    sync_lock(&writer->mutex);
    writer->stopping = true;
    (void)pthread_cond_signal(&writer->wake);
    sync_unlock(&writer->mutex);
    sync_join(writer->thread);
    deinit_queue(writer);
    features_free(writer->features);
    features_free(writer->other_words);
    codec_deinit(&writer->record);
    free(writer);
}

void writer_use_words(struct writer *writer, const struct features_settings *settings)
{
    struct features *words = NULL;
    if (features_new(settings, &words) < 0) {
        return;
    }
    sync_lock(&writer->mutex);
    struct features *unused = writer->other_words;
    writer->other_words = words;
    sync_unlock(&writer->mutex);
    features_free(unused);
}

void writer_push(struct writer *writer, struct change *change)
{
    sync_lock(&writer->mutex);
    append(&writer->queued, change);
    (void)pthread_cond_signal(&writer->wake);
    sync_unlock(&writer->mutex);
}

struct change *writer_take_done(struct writer *writer)
{
    sync_lock(&writer->mutex);
    struct change *done = writer->done.first;
    writer->done = (struct change_list){0};
    sync_unlock(&writer->mutex);
    return done;
}

void writer_wake(struct writer *writer)
{
    sync_lock(&writer->mutex);
    writer->woken = true;
    (void)pthread_cond_signal(&writer->wake);
    sync_unlock(&writer->mutex);
}
