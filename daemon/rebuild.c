/*
 * Happy path: note in the store what is wanted; hold back the erasing of what the build needs;
 * learn the stored items, storing the model now and then; once it is near the model in use, wait
 * for the trainer, who alone knows a moment at which nothing is learned. The trainer has it learn
 * the last few changes, stores it, exchanges the two folders in one step, and exchanges the models
 * under the lock that all who ask hold for reading. Then the old model is removed, and the note
 * says what is in force.
 *
 * Failure paths: what cannot be read, learned or stored ends the build: its folder is removed, its
 * note taken back, and the model in use has seen nothing of it. A crash before the exchange leaves
 * the note and the folder, from which the next start goes on; one behind it leaves the new model in
 * its place, which the next start knows by the number in its text, whatever the note says.
 */
#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/clock.h"
#include "daemon/log.h"
#include "daemon/rebuild_private.h"
#include "storage/model_store_next.h"

/* --- what all may know --------------------------------------------------------------------------
 */

void rebuild_set_phase(struct rebuild *rebuild, enum rebuild_phase phase)
{
    sync_lock(&rebuild->mutex);
    rebuild->phase = phase;
    (void)pthread_cond_broadcast(&rebuild->moved);
    sync_unlock(&rebuild->mutex);
}

void rebuild_publish(struct rebuild *rebuild)
{
    sync_lock(&rebuild->mutex);
    rebuild->learned = rebuild->build.learned;
    rebuild->bytes = rebuild->build.bytes;
    sync_unlock(&rebuild->mutex);
}

enum rebuild_phase rebuild_phase_now(struct rebuild *rebuild)
{
    sync_lock(&rebuild->mutex);
    enum rebuild_phase phase = rebuild->phase;
    sync_unlock(&rebuild->mutex);
    return phase;
}

/* --- the trainer --------------------------------------------------------------------------------
 */

/*
 * Not before the trainer has come to the moment: what comes up to there is not learned as it learns
 * (see build.h). Nor before it has come to the build, which a crash may have left far behind it,
 * where the build was stored later than the model: it would learn the changes between once more.
 */
static bool begin_taking(struct rebuild *rebuild, uint64_t learned)
{
    sync_lock(&rebuild->mutex);
    bool is_ready = rebuild->phase == REBUILD_READY && !rebuild->stopping &&
                    learned >= rebuild->notes.next.seq && learned >= rebuild->learned;
    if (is_ready) {
        rebuild->phase = REBUILD_TAKING;
    }
    sync_unlock(&rebuild->mutex);
    return is_ready;
}

static int catch_up(struct rebuild *rebuild, uint64_t learned)
{
    int code = STORE_OK;
    while (code == STORE_OK && rebuild->build.learned < learned) {
        code = build_learn(&rebuild->build, learned, &rebuild->error);
        if (code == STORE_OK && build_is_full(&rebuild->build)) {
            code = build_keep(&rebuild->build, &rebuild->error);
        }
    }
    rebuild_publish(rebuild);
    return code == STORE_OK ? build_keep(&rebuild->build, &rebuild->error) : code;
}

/* Nobody asks meanwhile, so nobody sees the one without the other. */
static int exchange(struct rebuild *rebuild, struct shared_model *shared,
                    const struct rebuild_trainer *trainer)
{
    struct build *build = &rebuild->build;
    shared_model_write(shared);
    int code = model_store_exchange(shared->store, build->model_store, &rebuild->error);
    if (code == STORE_OK) {
        shared_model_exchange(shared, &build->model, &build->model_store);
        struct change_reader *reader = *trainer->reader;
        *trainer->reader = build->reader;
        build->reader = reader;
        memcpy(trainer->text, build->text, sizeof build->text);
        sync_lock(&rebuild->mutex);
        rebuild->used = rebuild->next;
        struct features_settings words = options_features_settings(&rebuild->used);
        words.key = rebuild->settings.key;
        rebuild->settings.words(rebuild->settings.user, &words);
        sync_unlock(&rebuild->mutex);
    }
    shared_model_unlock(shared);
    return code;
}

bool rebuild_take_over(struct rebuild *rebuild, struct shared_model *shared,
                       const struct rebuild_trainer *trainer)
{
    if (!begin_taking(rebuild, trainer->learned)) {
        return false;
    }
    int code = catch_up(rebuild, trainer->learned);
    if (code == STORE_OK) {
        code = exchange(rebuild, shared, trainer);
    }
    struct store_error error = {0};
    if (code == STORE_OK && model_store_settle(&rebuild->settings.places, &error) != STORE_OK) {
        log_line(LOG_CAUTION, "rebuild: a loss of power may bring the old model back (%s)",
                 error.text);
    }
    if (code == STORE_OK) {
        backlog_hold(rebuild->settings.backlog, BACKLOG_REBUILD, UINT64_MAX);
    }
    rebuild_set_phase(rebuild, code == STORE_OK ? REBUILD_TAKEN : REBUILD_FAILED);
    return code == STORE_OK;
}

/* --- any thread ---------------------------------------------------------------------------------
 */

/* The mutex is the caller's; no thread is at work. */
static int start_thread(struct rebuild *rebuild)
{
    if (rebuild->is_begun) {
        sync_join(rebuild->thread);
        rebuild->is_begun = false;
    }
    int code = -pthread_create(&rebuild->thread, NULL, rebuild_run, rebuild);
    rebuild->is_begun = code == 0;
    return code;
}

static int claim(struct rebuild *rebuild)
{
    sync_lock(&rebuild->mutex);
    int code = rebuild->phase != REBUILD_IDLE || rebuild->stopping ? -EBUSY
               : rebuild->is_barred                                ? -EAGAIN
                                                                   : 0;
    if (code == 0) {
        rebuild->phase = REBUILD_STARTING;
    }
    sync_unlock(&rebuild->mutex);
    return code;
}

bool rebuild_bar(struct rebuild *rebuild)
{
    sync_lock(&rebuild->mutex);
    bool is_free = rebuild->phase == REBUILD_IDLE;
    rebuild->is_barred = is_free;
    sync_unlock(&rebuild->mutex);
    return is_free;
}

void rebuild_unbar(struct rebuild *rebuild)
{
    sync_lock(&rebuild->mutex);
    rebuild->is_barred = false;
    sync_unlock(&rebuild->mutex);
}

/* What was claimed is free again; what is superseded need not be held. */
static void give_back(struct rebuild *rebuild)
{
    backlog_hold(rebuild->settings.backlog, BACKLOG_REBUILD, UINT64_MAX);
    rebuild->settings.let_go(rebuild->settings.user);
    rebuild_set_phase(rebuild, REBUILD_IDLE);
}

/* Starts the thread with what was noted. */
static int launch(struct rebuild *rebuild, const struct options *wanted,
                  const struct learning_notes *notes)
{
    sync_lock(&rebuild->mutex);
    rebuild->notes = *notes;
    rebuild->seq = notes->next.seq;
    options_take_learning(&rebuild->next, wanted);
    rebuild->learned = 0;
    rebuild->has_ended = false;
    rebuild->ended_seq = notes->next.seq;
    rebuild->failure[0] = '\0';
    rebuild->phase = REBUILD_BUILDING;
    int code = start_thread(rebuild);
    sync_unlock(&rebuild->mutex);
    return code;
}

int rebuild_begin(struct rebuild *rebuild, const struct options *wanted, uint64_t *ret_seq,
                  struct store_error *error)
{
    int code = claim(rebuild);
    if (code < 0) {
        return code;
    }
    struct learning_notes notes = rebuild->notes; /* whoever has claimed it alone changes them */
    uint64_t number = (uint64_t)clock_wall_ms();  /* no failed one has had it */
    number = number > notes.used.number ? number : notes.used.number + 1;
    uint64_t seq = backlog_hold_committed(rebuild->settings.backlog, BACKLOG_REBUILD);
    learning_choose(&rebuild->settings.configured, wanted, number, seq, &notes.next);
    if (learning_notes_write(rebuild->settings.store, &notes, error) != STORE_OK) {
        give_back(rebuild);
        return -EIO;
    }
    troubles_end(rebuild->settings.troubles, TROUBLE_REBUILDING);
    log_line(LOG_NOTE, "rebuild: a new model is learned from %llu changes, beside the one in use",
             (unsigned long long)seq);
    if (launch(rebuild, wanted, &notes) < 0) {
        (void)store_fail(error, STORE_NO_MEMORY, "no thread can be started");
        rebuild_note(rebuild, false);
        give_back(rebuild);
        return -EIO;
    }
    *ret_seq = seq;
    return 0;
}

uint64_t rebuild_memory_bytes(struct rebuild *rebuild)
{
    uint64_t part = rebuild->settings.configured.memory_budget_bytes / REBUILD_MEMORY_PART;
    sync_lock(&rebuild->mutex);
    uint64_t taken = rebuild->bytes > part ? rebuild->bytes : part;
    uint64_t bytes = rebuild->phase == REBUILD_IDLE ? 0 : taken;
    sync_unlock(&rebuild->mutex);
    return bytes;
}

void rebuild_read(struct rebuild *rebuild, struct rebuild_state *ret_state)
{
    sync_lock(&rebuild->mutex);
    *ret_state = (struct rebuild_state){.is_running = rebuild->phase != REBUILD_IDLE,
                                        .seq = rebuild->seq,
                                        .learned = rebuild->learned,
                                        .options = rebuild->next,
                                        .has_ended = rebuild->has_ended,
                                        .ended_seq = rebuild->ended_seq};
    memcpy(ret_state->failure, rebuild->failure, sizeof ret_state->failure);
    sync_unlock(&rebuild->mutex);
}

void rebuild_lay_over(struct rebuild *rebuild, struct options *options)
{
    sync_lock(&rebuild->mutex);
    options_take_learning(options, &rebuild->used);
    sync_unlock(&rebuild->mutex);
}

/* --- life ---------------------------------------------------------------------------------------
 */

int rebuild_new(const struct rebuild_settings *settings, struct rebuild **ret_rebuild)
{
    struct rebuild *rebuild = calloc(1, sizeof *rebuild);
    if (!rebuild) {
        return -ENOMEM;
    }
    int code = -pthread_mutex_init(&rebuild->mutex, NULL);
    if (code < 0) {
        free(rebuild);
        return code;
    }
    code = sync_init_condition(&rebuild->moved);
    if (code < 0) {
        (void)pthread_mutex_destroy(&rebuild->mutex); /* nobody knows it yet */
        free(rebuild);
        return code;
    }
    rebuild->settings = *settings;
    rebuild->used = settings->start.used;
    rebuild->next = settings->start.next;
    rebuild->notes = settings->start.notes;
    if (rebuild->notes.next.number > 0) {
        backlog_hold(settings->backlog, BACKLOG_REBUILD, rebuild->notes.next.seq);
    }
    *ret_rebuild = rebuild;
    return 0;
}

/* What an earlier life has left of a model that nobody builds any more. */
static void remove_leftovers(const struct rebuild *rebuild)
{
    struct store_error error = {0};
    if (model_store_remove_next(&rebuild->settings.places, &error) != STORE_OK) {
        log_line(LOG_CAUTION, "what is left of a rebuild stays (%s)", error.text);
    }
}

int rebuild_resume(struct rebuild *rebuild)
{
    sync_lock(&rebuild->mutex);
    bool is_due = rebuild->notes.next.number > 0;
    rebuild->phase = is_due ? REBUILD_BUILDING : REBUILD_IDLE;
    rebuild->seq = rebuild->notes.next.seq;
    rebuild->ended_seq = rebuild->seq;
    int code = is_due ? start_thread(rebuild) : 0;
    rebuild->phase = code == 0 ? rebuild->phase : REBUILD_IDLE;
    sync_unlock(&rebuild->mutex);
    if (is_due && code == 0) {
        log_line(LOG_NOTE, "rebuild: the new model that was being learned is gone on with");
    } else if (!is_due) {
        remove_leftovers(rebuild);
    }
    return code;
}

void rebuild_stop(struct rebuild *rebuild)
{
    sync_lock(&rebuild->mutex);
    rebuild->stopping = true;
    (void)pthread_cond_broadcast(&rebuild->moved);
    sync_unlock(&rebuild->mutex);
}

void rebuild_free(struct rebuild *rebuild)
{
    if (!rebuild) {
        return;
    }
    if (rebuild->is_begun) {
        sync_join(rebuild->thread);
    }
    (void)pthread_cond_destroy(&rebuild->moved); /* nobody waits any more */
    (void)pthread_mutex_destroy(&rebuild->mutex);
    free(rebuild);
}
