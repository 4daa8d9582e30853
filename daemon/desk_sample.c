/*
 * desk.sample: items drawn at random for a check.
 */
#include <stdlib.h>
#include <sys/random.h>

#include "daemon/answer.h"
#include "daemon/params.h"
#include "daemon/read_job.h"
#include "storage/items_sample.h"

struct sample_job {
    struct read_job job; /* first */
    uint64_t most;
    uint64_t seed;
    struct workspace *workspace;
    uint64_t seqs[ITEMS_SAMPLE_MOST];
};

static void release(struct read_job *base)
{
    struct sample_job *job = (struct sample_job *)base;
    if (job->workspace) {
        workspaces_return(engine_workspaces(base->methods->engine), job->workspace);
    }
}

static json_t *ids_json(struct sample_job *job, struct store_view *view, size_t count)
{
    struct store_error error = {0};
    struct workspace *workspace = job->workspace;
    json_t *ids = json_array();
    for (size_t i = 0; i < count; i++) {
        if (items_read(view, job->seqs[i], &workspace->buffer, &workspace->record, &error) !=
            STORE_OK) {
            (void)read_job_fail(&job->job, &error); /* told at the end */
            json_decref(ids);
            return NULL;
        }
        answer_append(&ids, json_stringn(workspace->record.id.data, workspace->record.id.size));
    }
    return ids;
}

static void run(struct read_job *base)
{
    struct sample_job *job = (struct sample_job *)base;
    struct store_view *view = NULL;
    struct store_error error = {0};
    size_t count = 0;
    job->workspace = workspaces_borrow(engine_workspaces(base->methods->engine));
    if (!job->workspace || read_job_view(base, &view) < 0) {
        return;
    }
    if (items_sample(view, job->seed, (size_t)job->most, &job->workspace->buffer, job->seqs, &count,
                     &error) != STORE_OK) {
        (void)read_job_fail(base, &error); /* told at the end */
    } else {
        json_t *ids = ids_json(job, view, count);
        base->result = ids ? json_pack("{s:o}", "items", ids) : NULL;
    }
    store_end(view);
}

static int read_request(struct sample_job *job, const json_t *params, struct fault *fault)
{
    static const char *const MEMBERS[] = {"most", "seed", NULL};
    job->most = 20;
    if (!params_has(params, "seed") &&
        getrandom(&job->seed, sizeof job->seed, 0) != (ssize_t)sizeof job->seed) {
        return fault_set(fault, FAULT_INTERNAL, NULL, "There is no randomness.");
    }
    if (params_known(params, MEMBERS, fault) < 0 ||
        params_whole(params, "most", 1, ITEMS_SAMPLE_MOST, &job->most, fault) < 0 ||
        params_whole(params, "seed", 0, INT64_MAX, &job->seed, fault) < 0) {
        return fault->code;
    }
    return 0;
}

void desk_sample(struct call *call, const json_t *params)
{
    struct sample_job *job = read_job_new(call, params, sizeof *job);
    if (!job) {
        return;
    }
    job->job.run = run;
    job->job.release = release;
    read_job_start(&job->job, read_request(job, params, &job->job.fault));
}
