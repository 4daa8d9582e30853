/*
 * change_job: a request that changes an item, on its way through the writer, and what became of it
 * as an answer. A method makes a job, reads the request into its change, and starts it.
 */
#ifndef UNDERTAG_CHANGE_JOB_H
#define UNDERTAG_CHANGE_JOB_H

#include "daemon/fields.h"
#include "daemon/methods_private.h"
#include "daemon/params.h"
#include "daemon/writer.h"

/* A change with everything that it points to. */
struct change_job {
    struct change change; /* first, so that the one leads to the other */
    struct call *call;
    const struct options *options; /* for reading the request */
    struct params_names tags;      /* what the change's lists point into */
    struct params_names prompted;
    struct params_names declined;
    const char *tags_member; /* the members of the request that `tags` and `declined` came from */
    const char *declined_member;
    char *fields;
    struct field_list field_list;
    struct features_source source;
    char filed_at[PARAMS_TIME_BYTES];
    char language[PARAMS_LANGUAGE_BYTES + 1];
};

/* NULL ends the call with a fault. */
struct change_job *change_job_new(struct call *call, enum change_kind kind);

/* Hands the change over; or, where reading the request gave a code below 0 and `fault` is filled,
 * ends the call. */
void change_job_start_take(struct change_job *job, int code, const struct fault *fault);

/* Points the change's lists to the job's names. */
void change_job_use_names(struct change_job *job);

/* A fault at one entry of a list of the request; returns its code. */
int change_job_name_fault(struct fault *fault, const char *list, size_t at, const char *sentence);

#endif
