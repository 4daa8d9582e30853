#include "daemon/read_job.h"

#include <stdlib.h>

static void end(struct read_job *job)
{
    struct call *call = job->call;
    char *text = job->text;
    bool has_result = job->has_result;
    struct fault fault = job->fault;
    if (job->release) {
        job->release(job);
    }
    free(job);
    if (fault.code != 0) {
        free(text);
        call_fail(call, &fault);
    } else if (has_result) {
        call_answer_text_take(call, text);
    } else {
        call_answer_take(call, NULL);
    }
}

void *read_job_new(struct call *call, const json_t *params, size_t size)
{
    struct read_job *job = calloc(1, size);
    if (!job) {
        struct fault fault = {0};
        (void)fault_set(&fault, FAULT_INTERNAL, NULL, "There is no memory for the request.");
        call_fail(call, &fault);
        return NULL;
    }
    job->call = call;
    job->methods = call_context(call);
    job->params = params;
    return job;
}

static void on_work(uv_work_t *work)
{
    struct read_job *job = work->data;
    job->run(job);
    if (job->result) {
        job->has_result = true;
        job->text = call_result_text(job->call, job->result); /* a large one takes a while */
        /* Where it was made: memory that comes back to this thread is at hand for its next job. */
        json_decref(job->result);
        job->result = NULL;
    } else if (job->written) {
        job->has_result = true;
        job->text = call_written_text(job->call, job->written);
        free(job->written);
        job->written = NULL;
    }
}

static void on_done(uv_work_t *work, int status)
{
    (void)status; /* never cancelled */
    end(work->data);
}

void read_job_start(struct read_job *job, int code)
{
    if (code == 0) {
        job->work.data = job;
        code = uv_queue_work(job->methods->loop, &job->work, on_work, on_done);
        if (code == 0) {
            return;
        }
        (void)fault_set(&job->fault, FAULT_INTERNAL, NULL, "The request cannot be run: %s.",
                        uv_strerror(code));
    }
    end(job);
}

int read_job_view(struct read_job *job, struct store_view **ret_view)
{
    struct store_error error = {0};
    if (store_read(engine_store(job->methods->engine), ret_view, &error) != STORE_OK) {
        return read_job_fail(job, &error);
    }
    return 0;
}

int read_job_fail(struct read_job *job, const struct store_error *error)
{
    return fault_of_store(&job->fault, error);
}

int read_job_fail_model(struct read_job *job)
{
    return fault_set(&job->fault, FAULT_INTERNAL, NULL,
                     "A part of what was learned cannot be read from HOME/model. Nothing that was "
                     "filed is lost: without that folder a restart learns it again.");
}

int fault_of_store(struct fault *fault, const struct store_error *error)
{
    const char *reason = error->text[0] ? error->text : store_code_sentence(error->code);
    if (error->code == STORE_FULL || error->code == STORE_BROKEN) {
        return fault_set(fault, FAULT_STORE, NULL,
                         "The store cannot take it now: %s. Nothing was changed; try again.",
                         reason);
    }
    return fault_set(fault, FAULT_INTERNAL, NULL, "The store cannot answer: %s.", reason);
}
