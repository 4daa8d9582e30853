/*
 * Happy path: a snapshot is begun by whoever may (snapshots_write, snapshots_tick); the thread
 * opens the folder, waits for a moment, has the writer write it, points `latest` to it, and thins
 * out the old ones.
 *
 * Failure paths: the writer leaves nothing of what fails; the sentence is kept for state, log and
 * whoever waits. `latest` points to what was whole before.
 */
#include "daemon/snapshot/snapshots.h"

#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <time.h>
#include <unistd.h>

#include "daemon/clock.h"
#include "daemon/log.h"
#include "daemon/sync.h"

enum {
    NICE = 10,
    MINUTE_MS = 60000
};

struct snapshots {
    struct snapshots_settings settings;
    pthread_mutex_t mutex;
    pthread_cond_t moved;
    pthread_t thread;
    bool is_joinable;
    bool is_running;
    bool stopping;
    uint64_t ended; /* how many have, for whoever waits */
    struct snapshot_wanted wanted;
    size_t keep;
    struct pace pace;
    int64_t since_ms;
    int code; /* of the last that ended */
    struct store_error error;
    struct snapshot_written written;
    int64_t last_at_ms; /* when the newest one was begun, for the schedule; 0: there is none */
    uint64_t last_seq;
};

/* --- one snapshot: its thread -------------------------------------------------------------------
 */

/* The snapshot is there and whole all the same. */
static void point_latest(struct export_folder *folder, const char *name)
{
    char sentence[EXPORT_ERROR_BYTES];
    if (export_folder_point(folder, name, sentence) < 0) {
        log_line(LOG_CAUTION, "snapshot: the link to the latest leads to one before: %s", sentence);
    }
}

static void thin(struct export_folder *folder, size_t keep)
{
    char sentence[EXPORT_ERROR_BYTES];
    size_t removed = 0;
    if (snapshot_thin(folder, keep, &removed, sentence) < 0) {
        log_line(LOG_CAUTION, "snapshot: an old one stays: %s", sentence);
    }
    if (removed > 0) {
        log_line(LOG_NOTE, "snapshot: %zu older than the %zu to keep removed", removed, keep);
    }
}

static int write_into(struct snapshots *snapshots, struct export_folder *folder,
                      struct snapshot_written *ret_written, struct store_error *error)
{
    struct moment moment = {0};
    struct engine *engine = snapshots->settings.engine;
    int code = engine_take_moment(engine, &moment, error);
    if (code != STORE_OK) {
        return code;
    }
    if (snapshots->wanted.name[0] == '\0') {
        time_t now = (time_t)(snapshots->since_ms / 1000);
        struct tm utc;
        char time[sizeof "20261202T101500Z"];
        (void)gmtime_r(&now, &utc); /* within what it takes */
        (void)strftime(time, sizeof time, "%Y%m%dT%H%M%SZ", &utc);
        (void)snprintf(snapshots->wanted.name, sizeof snapshots->wanted.name, "%s-%llu", time,
                       (unsigned long long)moment.seq);
    }
    const struct snapshot_task task = {.wanted = &snapshots->wanted,
                                       .folder = folder,
                                       .moment = &moment,
                                       .pace = &snapshots->pace,
                                       .at_ms = snapshots->since_ms};
    code = snapshot_write(&task, ret_written, error);
    engine_give_back(engine, &moment);
    return code;
}

static int write_one(struct snapshots *snapshots, struct snapshot_written *ret_written,
                     struct store_error *error)
{
    char sentence[EXPORT_ERROR_BYTES];
    struct export_folder *folder = NULL;
    int result = export_folder_open(snapshots->settings.folder, &folder, sentence);
    if (result < 0) {
        return snapshot_fail_export(error, result, sentence);
    }
    int code = write_into(snapshots, folder, ret_written, error);
    if (code == STORE_OK) {
        point_latest(folder, ret_written->name);
        thin(folder, snapshots->keep);
    }
    export_folder_close(folder);
    return code;
}

static void tell(const struct snapshots *snapshots, const struct snapshot_written *written,
                 int code, const struct store_error *error)
{
    double seconds = (double)(clock_steady_us() - snapshots->pace.begun_us) / 1e6;
    struct troubles *troubles = engine_troubles(snapshots->settings.engine);
    if (code == STORE_OK) {
        troubles_end(troubles, TROUBLE_EXPORTING);
        log_line(LOG_NOTE, "snapshot: %s of change %llu is whole (%llu bytes, %.1f s)",
                 written->name, (unsigned long long)written->seq,
                 (unsigned long long)written->bytes, seconds);
    } else if (code == STORE_STOPPED || code == STORE_REFUSED || code == STORE_NOT_FOUND) {
        log_line(LOG_NOTE, "snapshot: none was written: %s", error->text);
    } else {
        troubles_begin(troubles, TROUBLE_EXPORTING,
                       "the last snapshot could not be written (%s); the one before stays",
                       error->text[0] ? error->text : store_code_sentence(error->code));
    }
}

static void *run(void *argument)
{
    struct snapshots *snapshots = argument;
    struct snapshot_written written = {0};
    struct store_error error = {0};
    /* Of this thread alone: whoever asks and files goes first. It may always be nicer. */
    (void)setpriority(PRIO_PROCESS, (id_t)gettid(), NICE);
    int code = write_one(snapshots, &written, &error);
    tell(snapshots, &written, code, &error);
    sync_lock(&snapshots->mutex);
    snapshots->code = code;
    snapshots->error = error;
    if (code == STORE_OK) {
        snapshots->written = written;
        snapshots->last_at_ms = written.at_ms;
        snapshots->last_seq = written.seq;
    }
    snapshots->is_running = false;
    snapshots->ended++;
    (void)pthread_cond_broadcast(&snapshots->moved);
    sync_unlock(&snapshots->mutex);
    return NULL;
}

/* --- beginning one ------------------------------------------------------------------------------
 */

struct snapshot_wanted snapshots_wanted(const struct options *options)
{
    return (struct snapshot_wanted){.items = options->snapshot_items,
                                    .proposals = options->snapshot_proposals,
                                    .floor = options->snapshot_floor,
                                    .bytes_a_second = options->snapshot_rate_bytes};
}

/* The mutex is the caller's; none is running. */
static int begin(struct snapshots *snapshots, const struct snapshot_wanted *wanted, size_t keep,
                 struct store_error *error)
{
    if (snapshots->is_joinable) {
        sync_join(snapshots->thread); /* it has nothing left to do */
        snapshots->is_joinable = false;
    }
    snapshots->wanted = *wanted;
    snapshots->keep = keep;
    snapshots->since_ms = clock_wall_ms();
    pace_init(&snapshots->pace, wanted->bytes_a_second);
    int errnum = pthread_create(&snapshots->thread, NULL, run, snapshots);
    if (errnum != 0) {
        return store_fail(error, STORE_NO_MEMORY, "a thread cannot be started: %s",
                          strerror(errnum));
    }
    snapshots->is_joinable = true;
    snapshots->is_running = true;
    return STORE_OK;
}

/* Waits for the end of the one that was begun when so many had ended; the mutex is the caller's. */
static int wait_for_end(struct snapshots *snapshots, uint64_t ended,
                        struct snapshot_written *ret_written, struct store_error *error)
{
    while (snapshots->ended == ended) {
        (void)pthread_cond_wait(&snapshots->moved, &snapshots->mutex); /* it is looked at again */
    }
    if (snapshots->code == STORE_OK) {
        *ret_written = snapshots->written;
    } else {
        *error = snapshots->error;
    }
    return snapshots->code;
}

int snapshots_write(struct snapshots *snapshots, const struct snapshot_wanted *wanted, size_t keep,
                    bool waits, struct snapshot_written *ret_written, bool *ret_is_busy,
                    struct store_error *error)
{
    int code = STORE_OK;
    sync_lock(&snapshots->mutex);
    *ret_is_busy = snapshots->is_running;
    if (snapshots->stopping) {
        code = store_fail(error, STORE_STOPPED, "the daemon is stopping");
    } else if (snapshots->is_running) {
        code = store_fail(error, STORE_REFUSED, "a snapshot is being written already");
    } else {
        uint64_t ended = snapshots->ended;
        code = begin(snapshots, wanted, keep, error);
        if (code == STORE_OK && waits) {
            code = wait_for_end(snapshots, ended, ret_written, error);
        }
    }
    sync_unlock(&snapshots->mutex);
    return code;
}

/* --- the schedule -------------------------------------------------------------------------------
 */

/* The mutex is the caller's. A failed one is tried again after a while, not at once. */
static bool is_due(const struct snapshots *snapshots, const struct options *options, uint64_t seq)
{
    enum {
        TRY_AGAIN_MS = 10 * MINUTE_MS
    };
    int64_t now_ms = clock_wall_ms();
    bool is_new = seq != snapshots->last_seq; /* less: another home has written there */
    bool is_late =
        options->snapshot_every_minutes > 0 &&
        now_ms - snapshots->last_at_ms >= (int64_t)options->snapshot_every_minutes * MINUTE_MS;
    bool is_many =
        options->snapshot_changes > 0 &&
        (seq < snapshots->last_seq || seq - snapshots->last_seq >= options->snapshot_changes);
    bool has_failed = snapshots->ended > 0 && snapshots->code != STORE_OK &&
                      now_ms - snapshots->since_ms < TRY_AGAIN_MS;
    return is_new && (is_late || is_many) && !has_failed && !snapshots->is_running &&
           !snapshots->stopping;
}

void snapshots_tick(struct snapshots *snapshots, const struct options *options, uint64_t seq)
{
    struct store_error error = {0};
    const struct snapshot_wanted wanted = snapshots_wanted(options);
    sync_lock(&snapshots->mutex);
    if (is_due(snapshots, options, seq) &&
        begin(snapshots, &wanted, (size_t)options->snapshot_keep, &error) != STORE_OK) {
        log_line(LOG_CAUTION, "snapshot: %s", error.text);
    }
    sync_unlock(&snapshots->mutex);
}

/* --- looking ------------------------------------------------------------------------------------
 */

void snapshots_read(struct snapshots *snapshots, struct snapshots_state *ret_state)
{
    sync_lock(&snapshots->mutex);
    struct snapshots_state state = {.is_running = snapshots->is_running,
                                    .since_ms = snapshots->since_ms,
                                    .seq = snapshots->written.seq};
    const char *name = snapshots->written.name;
    if (snapshots->is_running) {
        state.bytes = atomic_load_explicit(&snapshots->pace.done, memory_order_relaxed);
        state.of = atomic_load_explicit(&snapshots->pace.expected, memory_order_relaxed);
        name = ""; /* the thread may be making it up */
    } else {
        state.bytes = snapshots->written.bytes;
        state.of = snapshots->written.bytes;
    }
    (void)stpcpy(state.name, name); /* both are of one size */
    if (snapshots->code != STORE_OK) {
        (void)stpcpy(state.failure, snapshots->error.text); /* likewise */
    }
    sync_unlock(&snapshots->mutex);
    *ret_state = state;
}

int snapshots_list(struct snapshots *snapshots, struct snapshot_found **ret_list, size_t *ret_count,
                   char *error)
{
    struct export_folder *folder = NULL;
    int code = export_folder_open_there(snapshots->settings.folder, &folder, error);
    if (code == 0) {
        code = snapshot_list(folder, ret_list, ret_count, error);
        export_folder_close(folder);
    } else if (code == -ENOENT) {
        *ret_list = NULL;
        *ret_count = 0;
        code = 0;
    }
    return code;
}

const char *snapshots_folder(const struct snapshots *snapshots)
{
    return snapshots->settings.folder;
}

/* --- life ---------------------------------------------------------------------------------------
 */

/* When the newest one was made. What cannot be read is told when one is written. */
static void look_back(struct snapshots *snapshots)
{
    char sentence[EXPORT_ERROR_BYTES];
    struct snapshot_found *list = NULL;
    size_t count = 0;
    if (snapshots_list(snapshots, &list, &count, sentence) == 0 && count > 0) {
        snapshots->last_at_ms = list[count - 1].at_ms;
        snapshots->last_seq = list[count - 1].seq;
    }
    free(list);
}

int snapshots_new(const struct snapshots_settings *settings, struct snapshots **ret_snapshots)
{
    struct snapshots *snapshots = calloc(1, sizeof *snapshots);
    if (!snapshots) {
        return -ENOMEM;
    }
    snapshots->settings = *settings;
    int code = -pthread_mutex_init(&snapshots->mutex, NULL);
    if (code == 0) {
        code = sync_init_condition(&snapshots->moved);
        if (code < 0) {
            (void)pthread_mutex_destroy(&snapshots->mutex); /* nobody knows it yet */
        }
    }
    if (code < 0) {
        free(snapshots);
        return code;
    }
    pace_init(&snapshots->pace, 0);
    look_back(snapshots);
    *ret_snapshots = snapshots;
    return 0;
}

void snapshots_stop(struct snapshots *snapshots)
{
    sync_lock(&snapshots->mutex);
    snapshots->stopping = true;
    bool is_running = snapshots->is_running;
    pace_stop(&snapshots->pace);
    sync_unlock(&snapshots->mutex);
    if (is_running) {
        engine_stop_moments(snapshots->settings.engine);
    }
}

void snapshots_free(struct snapshots *snapshots)
{
    if (!snapshots) {
        return;
    }
    if (snapshots->is_joinable) {
        sync_join(snapshots->thread);
    }
    (void)pthread_cond_destroy(&snapshots->moved); /* nobody uses them any more */
    (void)pthread_mutex_destroy(&snapshots->mutex);
    free(snapshots);
}
