/*
 * desk.standing: how good the proposals are, each item scored before it was learned.
 */
#include "daemon/answer.h"
#include "daemon/params.h"
#include "daemon/read_job.h"
#include "daemon/standing_json.h"

struct standing_job {
    struct read_job job; /* first */
    uint64_t window;
    uint64_t learned;
    struct standing_told told;
};

static void read_standing(void *user, const struct model *model, const struct base *base,
                          uint64_t learned)
{
    (void)base;
    struct standing_job *job = user;
    job->learned = learned;
    standing_tell(model_standing(model), job->window, &job->told);
}

static void run(struct read_job *base)
{
    struct standing_job *job = (struct standing_job *)base;
    if (engine_read_model(base->methods->engine, read_standing, job) < 0) {
        return; /* no result: no memory */
    }
    base->result = standing_json(&job->told, job->learned);
}

static int read_request(struct standing_job *job, const json_t *params, struct fault *fault)
{
    static const char *const MEMBERS[] = {"window", NULL};
    job->window = STANDING_WINDOW;
    if (params_known(params, MEMBERS, fault) < 0 ||
        params_whole(params, "window", 0, INT64_MAX, &job->window, fault) < 0) {
        return fault->code;
    }
    return 0;
}

void desk_standing(struct call *call, const json_t *params)
{
    struct standing_job *job = read_job_new(call, params, sizeof *job);
    if (!job) {
        return;
    }
    job->job.run = run;
    read_job_start(&job->job, read_request(job, params, &job->job.fault));
}
