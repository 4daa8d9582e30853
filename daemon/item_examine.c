/*
 * item.rule and item.check: what people say of a filed item, into changes.
 */
#include "daemon/change_job.h"

static int check_count(const struct change_job *job, const char *pointer, size_t count,
                       struct fault *fault)
{
    if (count > job->options->tags_limit) {
        return fault_set(fault, FAULT_LIMIT, pointer,
                         "An item has at most tags_limit tags, which is %zu.",
                         (size_t)job->options->tags_limit);
    }
    return 0;
}

/* --- item.rule ----------------------------------------------------------------------------------
 */

static int check_rulings(const struct change_job *job, struct fault *fault)
{
    if (job->tags.count + job->declined.count == 0) {
        return fault_set(fault, FAULT_PARAMS, "/belongs",
                         "A ruling names at least one tag, in belongs or in not.");
    }
    if (check_count(job, "/belongs", job->tags.count, fault) < 0 ||
        check_count(job, "/not", job->declined.count, fault) < 0) {
        return fault->code;
    }
    for (size_t i = 0; i < job->declined.count; i++) {
        if (params_names_hold(&job->tags, job->declined.names[i])) {
            return change_job_name_fault(fault, "not", job->declined.given_at[i],
                                         "A tag stands in belongs or in not, in one of them.");
        }
    }
    return 0;
}

static int read_ruling(struct change_job *job, const json_t *params, struct fault *fault)
{
    static const char *const MEMBERS[] = {"id", "belongs", "not", "editor", NULL};
    struct item_filing *filing = &job->change.filing;
    job->tags_member = "belongs";
    job->declined_member = "not";
    if (params_known(params, MEMBERS, fault) < 0 ||
        params_name(params, "id", &filing->id, fault) < 0 ||
        params_names(params, "belongs", &job->tags, fault) < 0 ||
        params_names(params, "not", &job->declined, fault) < 0 ||
        params_optional_name(params, "editor", &filing->tagger, fault) < 0 ||
        check_rulings(job, fault) < 0) {
        return fault->code;
    }
    change_job_use_names(job);
    return 0;
}

void item_rule(struct call *call, const json_t *params)
{
    struct fault fault = {0};
    struct change_job *job = change_job_new(call, CHANGE_RULE);
    if (job) {
        change_job_start_take(job, read_ruling(job, params, &fault), &fault);
    }
}

/* --- item.check ---------------------------------------------------------------------------------
 */

static int read_check(struct change_job *job, const json_t *params, struct fault *fault)
{
    static const char *const MEMBERS[] = {"id", "tags", "drawn", "checker", NULL};
    static const char *const DRAWN[] = {"picked", "random", NULL};
    struct item_filing *filing = &job->change.filing;
    size_t drawn = 0;
    if (params_known(params, MEMBERS, fault) < 0 ||
        params_name(params, "id", &filing->id, fault) < 0) {
        return fault->code;
    }
    if (!params_has(params, "tags")) {
        return fault_set(fault, FAULT_PARAMS, "/tags",
                         "tags is missing: a check gives the complete list, [] where there is "
                         "none.");
    }
    if (params_names(params, "tags", &job->tags, fault) < 0 ||
        check_count(job, "/tags", job->tags.count, fault) < 0 ||
        params_choice(params, "drawn", DRAWN, &drawn, fault) < 0 ||
        params_optional_name(params, "checker", &filing->tagger, fault) < 0) {
        return fault->code;
    }
    job->change.is_random = drawn == 1;
    change_job_use_names(job);
    return 0;
}

void item_check(struct call *call, const json_t *params)
{
    struct fault fault = {0};
    struct change_job *job = change_job_new(call, CHANGE_CHECK);
    if (job) {
        change_job_start_take(job, read_check(job, params, &fault), &fault);
    }
}
