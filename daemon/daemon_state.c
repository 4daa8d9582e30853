/*
 * daemon.state: how the daemon is.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "daemon/answer.h"
#include "daemon/clock.h"
#include "daemon/options_json.h"
#include "daemon/params.h"
#include "daemon/read_job.h"
#include "daemon/times.h"

struct state_job {
    struct read_job job;    /* first */
    json_t *of_loop;        /* what only the loop thread may look at */
    struct options options; /* as configured, then as they are in force */
};

static void release(struct read_job *base)
{
    json_decref(((struct state_job *)base)->of_loop);
}

/* --- on the loop thread -------------------------------------------------------------------------
 */

static json_t *rates_json(const struct methods *methods)
{
    struct engine_counts counts = engine_count(methods->engine);
    uint64_t now_ms = clock_steady_ms();
    return json_pack("{s:f, s:f, s:f}", "filed",
                     meter_rate(&methods->filed, counts.progress.committed, now_ms), "learned",
                     meter_rate(&methods->learned, counts.progress.learned, now_ms), "scored",
                     meter_rate(&methods->scored, counts.questions, now_ms));
}

static json_t *loop_json(const struct methods *methods)
{
    uint64_t up_ms = clock_steady_ms() - methods->started_ms;
    unsigned connections = methods->server ? server_connections(methods->server) : 0;
    return json_pack("{s:I, s:I, s:o}", "uptime_s", (json_int_t)(up_ms / 1000), "connections",
                     (json_int_t)connections, "rates", rates_json(methods));
}

/* --- in the pool --------------------------------------------------------------------------------
 */

/* Bytes of memory that the process has in use now: all, and what is not a part of a file (the rest
 * the system can take back at any time). Zeros where the system does not tell. */
struct process_memory {
    uint64_t resident;
    uint64_t anonymous;
};

static struct process_memory read_process_memory(void)
{
    char line[128];
    FILE *file = fopen("/proc/self/statm", "re");
    if (!file) {
        return (struct process_memory){0};
    }
    char *read = fgets(line, sizeof line, file);
    (void)fclose(file);                         /* it was only read */
    char *at = read ? strchr(line, ' ') : NULL; /* the first number is address space */
    if (!at) {
        return (struct process_memory){0};
    }
    uint64_t page = (uint64_t)sysconf(_SC_PAGESIZE);
    uint64_t resident = strtoull(at, &at, 10);
    uint64_t of_files = strtoull(at, NULL, 10);
    return (struct process_memory){.resident = resident * page,
                                   .anonymous = (resident - of_files) * page};
}

static json_t *memory_json(const struct engine_size *size)
{
    struct process_memory process = read_process_memory();
    json_t *memory = json_object();
    answer_add(&memory, "resident", answer_count(process.resident));
    answer_add(&memory, "anonymous", answer_count(process.anonymous));
    answer_add(&memory, "budget", answer_count(size->budget_bytes));
    answer_add(&memory, "dictionary", answer_count(size->model.dictionary_bytes));
    answer_add(&memory, "weights", answer_count(size->model.weights_bytes));
    answer_add(&memory, "counts", answer_count(size->model.counts_bytes));
    answer_add(&memory, "worklist", answer_count(size->model.worklist_bytes));
    answer_add(&memory, "asking", answer_count(size->asking_bytes));
    return memory;
}

static json_t *disk_json(const struct engine_size *size)
{
    json_t *disk = json_object();
    answer_add(&disk, "store", answer_count(size->store_bytes));
    answer_add(&disk, "model", answer_count(size->model_bytes));
    return disk;
}

static json_t *rehearsal_json(const struct model_rehearsal *rehearsal, uint64_t due)
{
    json_t *object = json_object();
    answer_add(&object, "passes", answer_count(rehearsal->rounds));
    answer_add(&object, "items", answer_count(rehearsal->items));
    answer_add(&object, "due", answer_count(due));
    return object;
}

static json_t *pruned_json(const struct model_size *size)
{
    json_t *object = json_object();
    answer_add(&object, "unspecific", answer_count(size->pruned.unspecific));
    answer_add(&object, "tiny", answer_count(size->pruned.tiny));
    return object;
}

static json_t *worklist_json(const struct model_size *size)
{
    json_t *object = json_object();
    answer_add(&object, "kept", answer_count(size->listed));
    answer_add(&object, "stale", answer_count(size->stale));
    return object;
}

static json_t *faults_json(struct troubles *troubles)
{
    json_t *faults = json_array();
    for (int i = 0; i < TROUBLE_KINDS; i++) {
        char sentence[TROUBLE_BYTES];
        troubles_read(troubles, (enum trouble)i, sentence);
        if (sentence[0] != '\0' && json_array_append_new(faults, json_string(sentence)) < 0) {
            json_decref(faults);
            return NULL;
        }
    }
    return faults;
}

/* The rebuild that runs, and the last that ended; null where there is none. */
static json_t *running_json(const struct rebuild_state *rebuild, uint64_t committed)
{
    return rebuild->is_running
               ? json_pack("{s:I, s:I, s:I, s:o}", "seq", (json_int_t)rebuild->seq, "learned",
                           (json_int_t)rebuild->learned, "of", (json_int_t)committed, "settings",
                           options_json(&rebuild->options, OPTIONS_IN(OPTIONS_LEARNING)))
               : json_null();
}

static json_t *ended_json(const struct rebuild_state *rebuild)
{
    return rebuild->has_ended
               ? json_pack("{s:I, s:s?}", "seq", (json_int_t)rebuild->ended_seq, "failure",
                           rebuild->failure[0] != '\0' ? rebuild->failure : NULL)
               : json_null();
}

static void add_rebuild(json_t **state, struct engine *engine, uint64_t committed)
{
    struct rebuild_state rebuild;
    engine_read_rebuild(engine, &rebuild);
    answer_add(state, "rebuild", running_json(&rebuild, committed));
    answer_add(state, "rebuilt", ended_json(&rebuild));
}

/* The snapshot that is being written, or the last one since the start; null where there is none. */
static json_t *snapshot_json(struct snapshots *snapshots)
{
    struct snapshots_state snapshot;
    char since[TIMES_BYTES];
    snapshots_read(snapshots, &snapshot);
    if (snapshot.since_ms == 0) {
        return json_null();
    }
    times_format(snapshot.since_ms, since);
    bool is_whole = snapshot.name[0] != '\0';
    json_t *object = json_object();
    answer_add(&object, "running", json_boolean(snapshot.is_running));
    answer_add(&object, "since", json_string(since));
    answer_add(&object, "bytes", answer_count(snapshot.bytes));
    answer_add(&object, "of", answer_count(snapshot.of));
    answer_add(&object, "name", is_whole ? json_string(snapshot.name) : json_null());
    answer_add(&object, "seq", is_whole ? answer_count(snapshot.seq) : json_null());
    answer_add(&object, "failure",
               snapshot.failure[0] != '\0' ? json_string(snapshot.failure) : json_null());
    return object;
}

/* The backup that is being written; null where there is none. */
static json_t *backup_json(struct engine *engine)
{
    struct backup_state backup;
    char since[TIMES_BYTES];
    backup_read(engine_backup(engine), &backup);
    if (!backup.is_running) {
        return json_null();
    }
    times_format(backup.since_ms, since);
    return json_pack("{s:s, s:I, s:I, s:s}", "name", backup.name, "bytes", (json_int_t)backup.bytes,
                     "of", (json_int_t)backup.of, "since", since);
}

static void add_progress(json_t **state, const struct backlog_numbers *progress)
{
    answer_add(state, "seq", answer_count(progress->committed));
    answer_add(state, "learned", answer_count(progress->learned));
    answer_add(state, "backlog", answer_count(progress->committed - progress->learned));
}

static json_t *state_json(struct state_job *job, struct store_totals totals)
{
    struct engine *engine = job->job.methods->engine;
    struct engine_size size;
    engine_measure(engine, &size);
    engine_lay_over(engine, &job->options);
    struct backlog_numbers progress = engine_count(engine).progress;
    json_t *state = json_object();
    answer_add(&state, "version", json_string(UNDERTAG_VERSION));
    answer_add(&state, "format", json_integer(STORE_FORMAT));
    answer_add(&state, "items", answer_count(totals.items));
    answer_add(&state, "tags", answer_count(totals.tags));
    answer_add(&state, "words", answer_count(size.model.words));
    answer_add(&state, "weights", answer_count(size.model.postings));
    answer_add(&state, "pruned", pruned_json(&size.model));
    add_progress(&state, &progress);
    answer_add(&state, "memory", memory_json(&size));
    answer_add(&state, "disk", disk_json(&size));
    answer_add(&state, "limits", options_json(&job->options, OPTIONS_IN(OPTIONS_LIMIT)));
    answer_add(
        &state, "settings",
        options_json(&job->options, OPTIONS_IN(OPTIONS_SETTING) | OPTIONS_IN(OPTIONS_LEARNING)));
    answer_add(&state, "rehearsal", rehearsal_json(&size.rehearsal, size.rehearsals_due));
    answer_add(&state, "worklist", worklist_json(&size.model));
    answer_add(&state, "snapshot", snapshot_json(job->job.methods->snapshots));
    answer_add(&state, "faults", faults_json(engine_troubles(engine)));
    add_rebuild(&state, engine, progress.committed);
    answer_add(&state, "backup", backup_json(engine));
    if (state && json_object_update(state, job->of_loop) < 0) {
        json_decref(state);
        return NULL;
    }
    return state;
}

static void run(struct read_job *base)
{
    struct state_job *job = (struct state_job *)base;
    struct store_view *view = NULL;
    if (!job->of_loop || read_job_view(base, &view) < 0) {
        return;
    }
    struct store_totals totals = store_view_totals(view);
    store_end(view);
    base->result = state_json(job, totals);
}

void daemon_state(struct call *call, const json_t *params)
{
    static const char *const MEMBERS[] = {NULL};
    struct state_job *job = read_job_new(call, params, sizeof *job);
    if (!job) {
        return;
    }
    job->job.run = run;
    job->job.release = release;
    job->of_loop = loop_json(job->job.methods);
    job->options = *job->job.methods->options;
    read_job_start(&job->job, params_known(params, MEMBERS, &job->job.fault));
}
