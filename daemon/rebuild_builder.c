/*
 * The builder's thread: learns the stored items, stores the build now and then, waits for the
 * trainer once it is near, and tidies up whatever came of it.
 */
#include <errno.h>
#include <malloc.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <unistd.h>

#include "daemon/clock.h"
#include "daemon/log.h"
#include "daemon/rebuild_private.h"
#include "storage/model_store_next.h"

enum {
    NEAR_CHANGES = 256,    /* that the trainer may have to learn while nothing else is learned */
    NICE = 19,             /* whatever else wants the processor comes first */
    FLUSHES = 5,           /* it is stored this many times more seldom than the model in use, */
    KEEP_SHARE = 20,       /* and for at most a twentieth of the time */
    STOP_KEEP_US = 1000000 /* stopping does not wait for a store that takes longer */
};

static bool is_stopping(struct rebuild *rebuild)
{
    sync_lock(&rebuild->mutex);
    bool stopping = rebuild->stopping;
    sync_unlock(&rebuild->mutex);
    return stopping;
}

/* What was superseded up to the moment is never needed, nor what the stored build has passed. */
static void hold(struct rebuild *rebuild)
{
    const struct build *build = &rebuild->build;
    uint64_t moment = build->settings.moment;
    backlog_hold(rebuild->settings.backlog, BACKLOG_REBUILD,
                 build->kept > moment ? build->kept : moment);
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
    rebuild_publish(rebuild);
    bool is_due = code == STORE_OK && (is_keep_due(rebuild) || build_is_full(&rebuild->build));
    return is_due ? keep(rebuild) : code;
}

/* Waits until the trainer has taken the build, or failed to; not while it is to stop. */
static void wait_for_trainer(struct rebuild *rebuild)
{
    rebuild_set_phase(rebuild, REBUILD_READY);
    backlog_nudge(rebuild->settings.backlog);
    sync_lock(&rebuild->mutex);
    while (rebuild->phase == REBUILD_TAKING ||
           (rebuild->phase == REBUILD_READY && !rebuild->stopping)) {
        (void)pthread_cond_wait(&rebuild->moved, &rebuild->mutex);
    }
    if (rebuild->phase == REBUILD_READY) {
        rebuild->phase = REBUILD_BUILDING;
    }
    sync_unlock(&rebuild->mutex);
}

/* Learns until the trainer has taken the build (TAKEN), something failed, or it is to stop
 * (BUILDING). */
static enum rebuild_phase build(struct rebuild *rebuild)
{
    int code = STORE_OK;
    hold(rebuild);
    rebuild_publish(rebuild);
    while (code == STORE_OK && !is_stopping(rebuild)) {
        if (!is_near(rebuild)) {
            code = build_on(rebuild);
            continue;
        }
        /* What is stored now need not be stored while the trainer waits. */
        code = keep(rebuild);
        if (code == STORE_OK && is_near(rebuild)) {
            wait_for_trainer(rebuild);
            enum rebuild_phase phase = rebuild_phase_now(rebuild);
            if (phase != REBUILD_BUILDING) {
                return phase;
            }
        }
    }
    return code == STORE_OK ? REBUILD_BUILDING : REBUILD_FAILED;
}

/* --- its end ------------------------------------------------------------------------------------
 */

/* Whatever fails here is done by the next start. */
static void remove_next(struct rebuild *rebuild)
{
    struct store_error error = {0};
    build_close(&rebuild->build);
    /* A whole model was let go of, the old one or the new: nobody else can use all of its holes. */
    (void)malloc_trim(0); /* says only whether there was something */
    if (model_store_remove_next(&rebuild->settings.places, &error) != STORE_OK) {
        log_line(LOG_CAUTION, "what is left of a rebuild stays until a restart (%s)", error.text);
    }
}

void rebuild_note(struct rebuild *rebuild, bool is_used)
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
    rebuild->phase = REBUILD_IDLE;
    (void)pthread_cond_broadcast(&rebuild->moved);
    sync_unlock(&rebuild->mutex);
}

static void end_taken(struct rebuild *rebuild, uint64_t begun_us)
{
    log_line(LOG_NOTE,
             "rebuild: the new model is in use, learned up to change %llu (%.1f s of building)",
             (unsigned long long)rebuild->learned, (double)(clock_steady_us() - begun_us) / 1e6);
    remove_next(rebuild);
    rebuild_note(rebuild, true);
    end(rebuild, "");
}

static void end_failed(struct rebuild *rebuild)
{
    char sentence[TROUBLE_BYTES];
    const struct store_error *error = &rebuild->error;
    uint64_t learned = rebuild->build.learned;
    remove_next(rebuild);
    rebuild_note(rebuild, false);
    backlog_hold(rebuild->settings.backlog, BACKLOG_REBUILD, UINT64_MAX);
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
    rebuild_set_phase(rebuild, REBUILD_IDLE);
}

void *rebuild_run(void *argument)
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
    enum rebuild_phase phase = REBUILD_FAILED;
    if (build_open(&settings, &rebuild->build, &rebuild->error) == STORE_OK) {
        phase = build(rebuild);
    }
    if (phase == REBUILD_TAKEN) {
        end_taken(rebuild, begun_us);
    } else if (phase == REBUILD_FAILED) {
        end_failed(rebuild);
    } else {
        end_stopped(rebuild);
    }
    return NULL;
}
