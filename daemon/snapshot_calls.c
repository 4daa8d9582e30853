/*
 * snapshot.write and snapshot.list.
 */
#include <stdlib.h>
#include <string.h>

#include "daemon/answer.h"
#include "daemon/clock.h"
#include "daemon/log.h"
#include "daemon/params.h"
#include "daemon/read_job.h"
#include "daemon/times.h"

/* --- snapshot.write -----------------------------------------------------------------------------
 */

enum {
    LEAST_RATE = 1 << 20 /* a moment is not held for longer than it takes */
};

struct write_job {
    struct read_job job; /* first */
    struct snapshot_wanted wanted;
    size_t keep;
    uint32_t uid; /* who asked */
};

static json_t *path_json(const struct snapshots *snapshots, const char *name)
{
    return json_sprintf("%s/%s", snapshots_folder(snapshots), name);
}

static int fail(struct read_job *job, bool is_busy, const struct store_error *error)
{
    const char *reason = error->text[0] ? error->text : store_code_sentence(error->code);
    switch (error->code) {
    case STORE_STOPPED:
        return fault_set(&job->fault, FAULT_STOPPING, NULL, "The daemon is shutting down.");
    case STORE_NOT_FOUND:
        return fault_set(&job->fault, FAULT_NOT_FOUND, NULL,
                         "There is nothing to write yet: no item has been filed.");
    case STORE_REFUSED:
        return is_busy ? fault_set(&job->fault, FAULT_STORE, NULL,
                                   "A snapshot is being written already (see daemon.state): try "
                                   "again once it has ended.")
                       : fault_set(&job->fault, FAULT_PARAMS, "/name",
                                   "The snapshot cannot be called so: %s.", reason);
    default:
        return fault_set(&job->fault, FAULT_STORE, NULL,
                         "The snapshot cannot be written: %s. The one before stays.", reason);
    }
}

static void run_write(struct read_job *base)
{
    struct write_job *job = (struct write_job *)base;
    struct snapshots *snapshots = base->methods->snapshots;
    struct snapshot_written written = {0};
    struct store_error error = {0};
    bool is_busy = false;
    uint64_t begun_us = clock_steady_us();
    log_line(LOG_NOTE, "snapshot: user %lu asks for one", (unsigned long)job->uid);
    if (snapshots_write(snapshots, &job->wanted, job->keep, true, &written, &is_busy, &error) !=
        STORE_OK) {
        (void)fail(base, is_busy, &error); /* told at the end */
        return;
    }
    json_t *result = json_object();
    answer_add(&result, "name", json_string(written.name));
    answer_add(&result, "path", path_json(snapshots, written.name));
    answer_add(&result, "seq", answer_count(written.seq));
    answer_add(&result, "bytes", answer_count(written.bytes));
    answer_add(&result, "seconds", answer_number((double)(clock_steady_us() - begun_us) / 1e6));
    base->result = result;
}

static int read_name(struct write_job *job, const json_t *params, struct fault *fault)
{
    struct store_text name = {0};
    if (params_optional_name(params, "name", &name, fault) < 0) {
        return fault->code;
    }
    if (name.size == 0) {
        return 0;
    }
    char text[EXPORT_NAME_BYTES] = "";
    if (name.size < sizeof text) {
        memcpy(text, name.data, name.size);
    }
    if (!export_name_is_valid(text)) {
        return fault_set(fault, FAULT_PARAMS, "/name",
                         "A snapshot's name has 1 to 64 letters, digits, '-', '_' and '.', does "
                         "not begin with '.' or '-', and is not '" EXPORT_LATEST "'.");
    }
    memcpy(job->wanted.name, text, sizeof text);
    job->wanted.is_named = true;
    return 0;
}

static int read_write_request(struct write_job *job, const json_t *params, struct fault *fault)
{
    static const char *const MEMBERS[] = {"name", "items", "proposals", "floor", "rate", NULL};
    if (params_known(params, MEMBERS, fault) < 0 || read_name(job, params, fault) < 0 ||
        params_flag(params, "items", &job->wanted.items, fault) < 0 ||
        params_flag(params, "proposals", &job->wanted.proposals, fault) < 0 ||
        params_share(params, "floor", &job->wanted.floor, fault) < 0 ||
        params_whole(params, "rate", LEAST_RATE, INT64_MAX, &job->wanted.bytes_a_second, fault) <
            0) {
        return fault->code;
    }
    return 0;
}

void snapshot_write_call(struct call *call, const json_t *params)
{
    struct write_job *job = read_job_new(call, params, sizeof *job);
    if (!job) {
        return;
    }
    const struct options *options = job->job.methods->options;
    job->job.run = run_write;
    job->uid = call_uid(call);
    job->wanted = snapshots_wanted(options);
    job->keep = (size_t)options->snapshot_keep;
    read_job_start(&job->job, read_write_request(job, params, &job->job.fault));
}

/* --- snapshot.list ------------------------------------------------------------------------------
 */

static json_t *found_json(const struct snapshots *snapshots, const struct snapshot_found *found)
{
    char time[TIMES_BYTES];
    times_format(found->at_ms, time);
    json_t *object = json_object();
    answer_add(&object, "name", json_string(found->name));
    answer_add(&object, "path", path_json(snapshots, found->name));
    answer_add(&object, "seq", answer_count(found->seq));
    answer_add(&object, "at", json_string(time));
    answer_add(&object, "bytes", answer_count(found->bytes));
    answer_add(&object, "named", json_boolean(found->is_named));
    answer_add(&object, "latest", json_boolean(found->is_latest));
    return object;
}

static void run_list(struct read_job *base)
{
    char sentence[EXPORT_ERROR_BYTES];
    struct snapshots *snapshots = base->methods->snapshots;
    struct snapshot_found *list = NULL;
    size_t count = 0;
    if (snapshots_list(snapshots, &list, &count, sentence) < 0) {
        (void)fault_set(&base->fault, FAULT_STORE, NULL, "The snapshots cannot be listed: %s.",
                        sentence);
        return;
    }
    json_t *entries = json_array();
    for (size_t i = 0; i < count; i++) {
        answer_append(&entries, found_json(snapshots, &list[i]));
    }
    free(list);
    json_t *result = json_object();
    answer_add(&result, "snapshots", entries);
    base->result = result;
}

void snapshot_list_call(struct call *call, const json_t *params)
{
    static const char *const MEMBERS[] = {NULL};
    struct read_job *job = read_job_new(call, params, sizeof *job);
    if (!job) {
        return;
    }
    job->run = run_list;
    read_job_start(job, params_known(params, MEMBERS, &job->fault));
}
