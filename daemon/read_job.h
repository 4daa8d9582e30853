/*
 * read_job: a request that is answered off the loop thread, in libuv's pool, since reading may
 * touch the disk and asking the model takes a while.
 *
 * A method embeds the job as its first member, starts it, and works in `run`, which sets either the
 * result or the fault. The job then ends the call and frees itself.
 */
#ifndef UNDERTAG_READ_JOB_H
#define UNDERTAG_READ_JOB_H

#include <jansson.h>
#include <stdbool.h>
#include <uv.h>

#include "daemon/call.h"
#include "daemon/methods_private.h"
#include "storage/store.h"

struct read_job {
    uv_work_t work; /* private */
    struct call *call;
    struct methods *methods;
    const json_t *params; /* borrowed; lives as long as the call */
    void (*run)(struct read_job *job);
    void (*release)(struct read_job *job); /* frees what the method has added; may be NULL */
    json_t *result;                        /* NULL without a fault: no memory */
    char *written;                         /* or the result as JSON; for free() */
    bool has_result;                       /* private */
    char *text;                            /* private */
    struct fault fault;
};

/* A job of `size` bytes, zeroed but for its first members. NULL ends the call with a fault. */
void *read_job_new(struct call *call, const json_t *params, size_t size);

/* Runs it; or, where reading the request gave a code below 0 and the job a fault, ends the call. */
void read_job_start(struct read_job *job, int code);

/* Begins a view; otherwise the job holds a fault. */
int read_job_view(struct read_job *job, struct store_view **ret_view)
    __attribute__((warn_unused_result));

/* Turns an error of storage into the job's fault; returns the fault's code. */
int read_job_fail(struct read_job *job, const struct store_error *error);

/* The job's fault where what is stored of the model cannot be read. */
int read_job_fail_model(struct read_job *job);

/* The fault that an error of storage is to a caller; returns its code. */
int fault_of_store(struct fault *fault, const struct store_error *error);

#endif
