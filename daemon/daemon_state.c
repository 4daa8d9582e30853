/*
 * daemon.state: how the daemon is.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "daemon/clock.h"
#include "daemon/params.h"
#include "daemon/read_job.h"

struct state_job {
    struct read_job job;    /* first */
    json_t *of_loop;        /* what only the loop thread may look at */
    struct options options; /* as configured, then as they are in force */
};

static void release(struct read_job *base)
{
    json_decref(((struct state_job *)base)->of_loop);
}

/* --- options ------------------------------------------------------------------------------------
 */

static json_t *option_json(const struct options_row *row)
{
    if (!row->is_number) {
        return json_string(row->value);
    }
    double number = strtod(row->value, NULL); /* our own text, in the "C" locale */
    return strpbrk(row->value, ".e") ? json_real(number) : json_integer((json_int_t)number);
}

#define IN(group) (1U << (group))

/* The options of these groups. */
static json_t *options_json(const struct options *options, unsigned groups)
{
    json_t *object = json_object();
    for (size_t i = 0; i < options_count(); i++) {
        struct options_row row;
        options_describe(options, i, &row);
        if ((groups & IN(row.group)) != 0 &&
            json_object_set_new(object, row.name, option_json(&row)) < 0) {
            json_decref(object);
            return NULL;
        }
    }
    return object;
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

/* Bytes of memory that the process has in use now; 0 where the system does not tell. */
static json_int_t resident_bytes(void)
{
    char line[128];
    FILE *file = fopen("/proc/self/statm", "re");
    if (!file) {
        return 0;
    }
    char *read = fgets(line, sizeof line, file);
    (void)fclose(file);                                   /* it was only read */
    const char *second = read ? strchr(line, ' ') : NULL; /* the first number is address space */
    long pages = second ? strtol(second, NULL, 10) : 0;
    return (json_int_t)pages * (json_int_t)sysconf(_SC_PAGESIZE);
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
                           options_json(&rebuild->options, IN(OPTIONS_LEARNING)))
               : json_null();
}

static json_t *ended_json(const struct rebuild_state *rebuild)
{
    return rebuild->has_ended
               ? json_pack("{s:I, s:s?}", "seq", (json_int_t)rebuild->ended_seq, "failure",
                           rebuild->failure[0] != '\0' ? rebuild->failure : NULL)
               : json_null();
}

static int add_rebuild(json_t *state, struct engine *engine, uint64_t committed)
{
    struct rebuild_state rebuild;
    engine_read_rebuild(engine, &rebuild);
    int code = json_object_set_new(state, "rebuild", running_json(&rebuild, committed));
    code |= json_object_set_new(state, "rebuilt", ended_json(&rebuild));
    return code;
}

static json_t *state_json(struct state_job *job, struct store_totals totals)
{
    struct engine *engine = job->job.methods->engine;
    struct engine_size size;
    engine_measure(engine, &size);
    struct backlog_numbers progress = engine_count(engine).progress;
    const json_t *of_loop = job->of_loop;
    engine_lay_over(engine, &job->options);
    json_t *state = json_pack(
        "{s:s, s:i, s:O, s:I, s:I, s:I, s:I, s:I, s:I, s:I, s:{s:I, s:I, s:I, s:I, s:I, s:I, s:I, "
        "s:I}, "
        "s:{s:I, s:I}, "
        "s:O, s:O, s:o, s:o, s:{s:i}, s:{s:I, s:I}, s:n, s:o}",
        "version", UNDERTAG_VERSION, "format", (int)STORE_FORMAT, "uptime_s",
        json_object_get(of_loop, "uptime_s"), "items", (json_int_t)totals.items, "tags",
        (json_int_t)totals.tags, "words", (json_int_t)size.model.words, "weights",
        (json_int_t)size.model.postings, "seq", (json_int_t)progress.committed, "learned",
        (json_int_t)progress.learned, "backlog",
        (json_int_t)(progress.committed - progress.learned), "memory", "resident", resident_bytes(),
        "dictionary", (json_int_t)size.model.dictionary_bytes, "weights",
        (json_int_t)size.model.weights_bytes, "counts", (json_int_t)size.model.counts_bytes,
        "worklist", (json_int_t)size.model.worklist_bytes, "asking", (json_int_t)size.asking_bytes,
        "budget", (json_int_t)size.budget_bytes, "disk", "store", (json_int_t)size.store_bytes,
        "model", (json_int_t)size.model_bytes, "connections",
        json_object_get(of_loop, "connections"), "rates", json_object_get(of_loop, "rates"),
        "limits", options_json(&job->options, IN(OPTIONS_LIMIT)), "settings",
        options_json(&job->options, IN(OPTIONS_SETTING) | IN(OPTIONS_LEARNING)), "rehearsal",
        "passes", 0, "worklist", "kept", (json_int_t)size.model.listed, "stale",
        (json_int_t)size.model.stale, "snapshot", "faults", faults_json(engine_troubles(engine)));
    if (state && add_rebuild(state, engine, progress.committed) < 0) {
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
