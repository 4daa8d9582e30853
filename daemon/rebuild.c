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
#include "daemon/rebuild.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <unistd.h>

#include "daemon/build.h"
#include "daemon/clock.h"
#include "daemon/log.h"
#include "daemon/sync.h"
#include "storage/model_store_next.h"

enum {
    NEAR_CHANGES = 256,    /* that the trainer may have to learn while nothing else is learned */
    NICE = 19,             /* whatever else wants the processor comes first */
    FLUSHES = 5,           /* it is stored this many times more seldom than the model in use, */
    KEEP_SHARE = 20,       /* and for at most a twentieth of the time */
    STOP_KEEP_US = 1000000 /* stopping does not wait for a store that takes longer */
};

enum phase {
    IDLE,
    STARTING, /* the thread of whoever asked for it */
    BUILDING, /* the builder's thread is at work */
    READY,    /* it waits for the trainer */
    TAKING,   /* the trainer is at work with the build */
    TAKEN,    /* the builder's thread again: the old model is removed */
    FAILED
};

struct rebuild {
    struct rebuild_settings settings;
    pthread_mutex_t mutex;
    pthread_cond_t moved; /* `phase` or `stopping` has changed */
    enum phase phase;     /* from here on: under the mutex */
    bool stopping;
    bool is_begun; /* the thread is to be joined */
    struct options used;
    struct options next;
    struct learning_notes notes;
    uint64_t learned; /* by the build */
    bool has_ended;
    uint64_t ended_seq;
    char failure[TROUBLE_BYTES];

    pthread_t thread;
    struct build build; /* the builder's, but the trainer's while it is TAKING */
    struct store_error error;
};

/* --- the builder's thread -----------------------------------------------------------------------
 */

static void set_phase(struct rebuild *rebuild, enum phase phase)
{
    sync_lock(&rebuild->mutex);
    rebuild->phase = phase;
    (void)pthread_cond_broadcast(&rebuild->moved);
    sync_unlock(&rebuild->mutex);
}

static bool is_stopping(struct rebuild *rebuild)
{
    sync_lock(&rebuild->mutex);
    bool stopping = rebuild->stopping;
    sync_unlock(&rebuild->mutex);
    return stopping;
}

static void publish(struct rebuild *rebuild)
{
    sync_lock(&rebuild->mutex);
    rebuild->learned = rebuild->build.learned;
    sync_unlock(&rebuild->mutex);
}

/* What was superseded up to the moment is never needed, nor what the stored build has passed. */
static void hold(struct rebuild *rebuild)
{
    const struct build *build = &rebuild->build;
    uint64_t moment = build->settings.moment;
    backlog_hold(rebuild->settings.backlog, build->kept > moment ? build->kept : moment);
    rebuild->settings.let_go(rebuild->settings.user);
}

static int keep(struct rebuild *rebuild)
{
    int code = build_keep(&rebuild->build, &rebuild->error);
    if (code == STORE_OK) {
        hold(rebuild);
    }
    return code;
}

static bool is_keep_due(const struct rebuild *rebuild)
{
    const struct build *build = &rebuild->build;
    const struct options *options = &rebuild->settings.configured;
    uint64_t waited_us = clock_steady_us() - build->kept_at_us;
    return waited_us >= KEEP_SHARE * build->keeping_us &&
           (waited_us >= FLUSHES * options->flush_every_ms * 1000 ||
            build->learned - build->kept >= FLUSHES * options->flush_changes);
}

/* Up to where it can be learned now: up to the moment whether the trainer has come there or not. */
static uint64_t goal(struct rebuild *rebuild)
{
    uint64_t moment = rebuild->build.settings.moment;
    uint64_t learned = backlog_read(rebuild->settings.backlog).learned;
    return learned > moment ? learned : moment;
}

static bool is_near(struct rebuild *rebuild)
{
    return rebuild->build.learned + NEAR_CHANGES >= goal(rebuild);
}

static int build_on(struct rebuild *rebuild)
{
    int code = build_learn(&rebuild->build, goal(rebuild), &rebuild->error);
    publish(rebuild);
    bool is_due = code == STORE_OK && (is_keep_due(rebuild) || build_is_full(&rebuild->build));
    return is_due ? keep(rebuild) : code;
}

/* Waits until the trainer has taken the build, or failed to; not while it is to stop. */
static void wait_for_trainer(struct rebuild *rebuild)
{
    set_phase(rebuild, READY);
    backlog_nudge(rebuild->settings.backlog);
    sync_lock(&rebuild->mutex);
    while (rebuild->phase == TAKING || (rebuild->phase == READY && !rebuild->stopping)) {
        (void)pthread_cond_wait(&rebuild->moved, &rebuild->mutex);
    }
    if (rebuild->phase == READY) {
        rebuild->phase = BUILDING;
    }
    sync_unlock(&rebuild->mutex);
}

static enum phase read_phase(struct rebuild *rebuild)
{
    sync_lock(&rebuild->mutex);
    enum phase phase = rebuild->phase;
    sync_unlock(&rebuild->mutex);
    return phase;
}

/* Learns until the trainer has taken the build (TAKEN), something failed, or it is to stop
 * (BUILDING). */
static enum phase build(struct rebuild *rebuild)
{
    int code = STORE_OK;
    hold(rebuild);
    publish(rebuild);
    while (code == STORE_OK && !is_stopping(rebuild)) {
        if (!is_near(rebuild)) {
            code = build_on(rebuild);
            continue;
        }
        /* What is stored now need not be stored while the trainer waits. */
        code = keep(rebuild);
        if (code == STORE_OK && is_near(rebuild)) {
            wait_for_trainer(rebuild);
            enum phase phase = read_phase(rebuild);
            if (phase != BUILDING) {
                return phase;
            }
        }
    }
    return code == STORE_OK ? BUILDING : FAILED;
}

/* --- its end ------------------------------------------------------------------------------------
 */

/* Whatever fails here is done by the next start. */
static void remove_next(struct rebuild *rebuild)
{
    struct store_error error = {0};
    build_close(&rebuild->build);
    if (model_store_remove_next(&rebuild->settings.places, &error) != STORE_OK) {
        log_line(LOG_CAUTION, "what is left of a rebuild stays until a restart (%s)", error.text);
    }
}

static void note(struct rebuild *rebuild, bool is_used)
{
    struct store_error error = {0};
    sync_lock(&rebuild->mutex);
    if (is_used) {
        rebuild->notes.used = rebuild->notes.next;
    }
    rebuild->notes.next = (struct learning_choices){0};
    const struct learning_notes notes = rebuild->notes;
    sync_unlock(&rebuild->mutex);
    if (learning_notes_write(rebuild->settings.store, &notes, &error) != STORE_OK) {
        log_line(LOG_CAUTION, "the end of a rebuild cannot be noted (%s): %s", error.text,
                 is_used ? "a restart will do so" : "a restart will begin it again");
    }
}

static void end(struct rebuild *rebuild, const char *failure)
{
    sync_lock(&rebuild->mutex);
    rebuild->has_ended = true;
    (void)stpncpy(rebuild->failure, failure, sizeof rebuild->failure - 1);
    rebuild->phase = IDLE;
    (void)pthread_cond_broadcast(&rebuild->moved);
    sync_unlock(&rebuild->mutex);
}

static void end_taken(struct rebuild *rebuild, uint64_t begun_us)
{
    log_line(LOG_NOTE,
             "rebuild: the new model is in use, learned up to change %llu (%.1f s of building)",
             (unsigned long long)rebuild->learned, (double)(clock_steady_us() - begun_us) / 1e6);
    remove_next(rebuild);
    note(rebuild, true);
    end(rebuild, "");
}

static void end_failed(struct rebuild *rebuild)
{
    char sentence[TROUBLE_BYTES];
    const struct store_error *error = &rebuild->error;
    uint64_t learned = rebuild->build.learned;
    remove_next(rebuild);
    note(rebuild, false);
    backlog_hold(rebuild->settings.backlog, UINT64_MAX);
    rebuild->settings.let_go(rebuild->settings.user);
    troubles_begin(rebuild->settings.troubles, TROUBLE_REBUILDING,
                   "the rebuild has ended behind change %llu (%s); the model stays as it was",
                   (unsigned long long)learned,
                   error->text[0] ? error->text : store_code_sentence(error->code));
    troubles_read(rebuild->settings.troubles, TROUBLE_REBUILDING, sentence);
    end(rebuild, sentence);
}

/* The next start goes on from what is stored. */
static void end_stopped(struct rebuild *rebuild)
{
    struct store_error error = {0};
    if (rebuild->build.keeping_us > STOP_KEEP_US ||
        build_keep(&rebuild->build, &error) != STORE_OK) {
        log_line(LOG_NOTE, "rebuild: what was built last is not stored%s%s",
                 error.text[0] ? ": " : "", error.text);
    }
    build_close(&rebuild->build);
    set_phase(rebuild, IDLE);
}

static void *run(void *argument)
{
    struct rebuild *rebuild = argument;
    uint64_t begun_us = clock_steady_us();
    /* Of this thread alone. It may always be nicer; where it cannot be, it goes on all the same. */
    (void)setpriority(PRIO_PROCESS, (id_t)gettid(), NICE);
    sync_lock(&rebuild->mutex);
    const struct options options = rebuild->next;
    const struct build_settings settings = {
        .store = rebuild->settings.store,
        .places = rebuild->settings.places,
        .options = &options,
        .key = rebuild->settings.key,
        .number = rebuild->notes.next.number,
        .moment = rebuild->notes.next.seq,
        .memory_bytes = rebuild->settings.configured.memory_budget_bytes / REBUILD_MEMORY_PART};
    sync_unlock(&rebuild->mutex);
    rebuild->error = (struct store_error){0};
    enum phase phase = FAILED;
    if (build_open(&settings, &rebuild->build, &rebuild->error) == STORE_OK) {
        phase = build(rebuild);
    }
    if (phase == TAKEN) {
        end_taken(rebuild, begun_us);
    } else if (phase == FAILED) {
        end_failed(rebuild);
    } else {
        end_stopped(rebuild);
    }
    return NULL;
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
    bool is_ready = rebuild->phase == READY && !rebuild->stopping &&
                    learned >= rebuild->notes.next.seq && learned >= rebuild->learned;
    if (is_ready) {
        rebuild->phase = TAKING;
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
    publish(rebuild);
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
        backlog_hold(rebuild->settings.backlog, UINT64_MAX);
    }
    set_phase(rebuild, code == STORE_OK ? TAKEN : FAILED);
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
    int code = -pthread_create(&rebuild->thread, NULL, run, rebuild);
    rebuild->is_begun = code == 0;
    return code;
}

static bool claim(struct rebuild *rebuild)
{
    sync_lock(&rebuild->mutex);
    bool is_free = rebuild->phase == IDLE && !rebuild->stopping;
    if (is_free) {
        rebuild->phase = STARTING;
    }
    sync_unlock(&rebuild->mutex);
    return is_free;
}

/* What was claimed is free again; what is superseded need not be held. */
static void give_back(struct rebuild *rebuild)
{
    backlog_hold(rebuild->settings.backlog, UINT64_MAX);
    rebuild->settings.let_go(rebuild->settings.user);
    set_phase(rebuild, IDLE);
}

/* Starts the thread with what was noted. */
static int launch(struct rebuild *rebuild, const struct options *wanted,
                  const struct learning_notes *notes)
{
    sync_lock(&rebuild->mutex);
    rebuild->notes = *notes;
    options_take_learning(&rebuild->next, wanted);
    rebuild->learned = 0;
    rebuild->has_ended = false;
    rebuild->ended_seq = notes->next.seq;
    rebuild->failure[0] = '\0';
    rebuild->phase = BUILDING;
    int code = start_thread(rebuild);
    sync_unlock(&rebuild->mutex);
    return code;
}

int rebuild_begin(struct rebuild *rebuild, const struct options *wanted, uint64_t *ret_seq,
                  struct store_error *error)
{
    if (!claim(rebuild)) {
        return -EBUSY;
    }
    struct learning_notes notes = rebuild->notes; /* whoever has claimed it alone changes them */
    uint64_t number = (uint64_t)clock_wall_ms();  /* no failed one has had it */
    number = number > notes.used.number ? number : notes.used.number + 1;
    uint64_t seq = backlog_hold_committed(rebuild->settings.backlog);
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
        note(rebuild, false);
        give_back(rebuild);
        return -EIO;
    }
    *ret_seq = seq;
    return 0;
}

bool rebuild_is_running(struct rebuild *rebuild)
{
    return read_phase(rebuild) != IDLE;
}

void rebuild_read(struct rebuild *rebuild, struct rebuild_state *ret_state)
{
    sync_lock(&rebuild->mutex);
    *ret_state = (struct rebuild_state){.is_running = rebuild->phase != IDLE,
                                        .seq = rebuild->notes.next.seq,
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
        backlog_hold(settings->backlog, rebuild->notes.next.seq);
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
    rebuild->phase = is_due ? BUILDING : IDLE;
    rebuild->ended_seq = rebuild->notes.next.seq;
    int code = is_due ? start_thread(rebuild) : 0;
    rebuild->phase = code == 0 ? rebuild->phase : IDLE;
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
