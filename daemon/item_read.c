/*
 * item.show and item.list: items as they are stored.
 */
#include "daemon/item_read.h"

#include "daemon/item_json.h"
#include "daemon/params.h"

enum {
    LIST_MOST = 10000
};

int read_item(struct read_job *job, struct store_view *view, struct store_text id,
              struct workspace *workspace)
{
    struct store_error error = {0};
    uint64_t seq = 0;
    int code = items_find(view, id, &seq, &error);
    if (code == STORE_NOT_FOUND) {
        return fault_set(&job->fault, FAULT_NOT_FOUND, "/id", "There is no item '%.*s'.",
                         (int)id.size, id.data);
    }
    if (code == STORE_OK) {
        code = items_read(view, seq, &workspace->buffer, &workspace->record, &error);
    }
    return code == STORE_OK ? 0 : read_job_fail(job, &error);
}

/* --- item.show ----------------------------------------------------------------------------------
 */

struct show_job {
    struct read_job job; /* first */
    struct store_text id;
};

static void run_show(struct read_job *base)
{
    struct show_job *job = (struct show_job *)base;
    struct workspaces *workspaces = engine_workspaces(base->methods->engine);
    struct store_view *view = NULL;
    struct workspace *workspace = workspaces_borrow(workspaces);
    if (!workspace) {
        return; /* no result: no memory */
    }
    if (read_job_view(base, &view) == 0) {
        if (read_item(base, view, job->id, workspace) == 0) {
            struct store_error error = {0};
            base->result = item_json(view, &workspace->record, &error);
            if (!base->result && error.code != STORE_OK) {
                (void)read_job_fail(base, &error); /* told at the end */
            }
        }
        store_end(view);
    }
    workspaces_return(workspaces, workspace);
}

static int read_show_request(struct show_job *job, const json_t *params, struct fault *fault)
{
    static const char *const MEMBERS[] = {"id", NULL};
    int code = params_known(params, MEMBERS, fault);
    return code < 0 ? code : params_name(params, "id", &job->id, fault);
}

void item_show(struct call *call, const json_t *params)
{
    struct show_job *job = read_job_new(call, params, sizeof *job);
    if (!job) {
        return;
    }
    job->job.run = run_show;
    read_job_start(&job->job, read_show_request(job, params, &job->job.fault));
}

/* --- item.list ----------------------------------------------------------------------------------
 */

struct list_job {
    struct read_job job; /* first */
    uint64_t since;
    uint64_t most;
    json_t *items;
};

static void release_list(struct read_job *base)
{
    json_decref(((struct list_job *)base)->items);
}

static int add_item(void *user, const struct item_record *record)
{
    struct list_job *job = user;
    return json_array_append_new(job->items,
                                 json_pack("{s:o, s:I, s:b}", "id", item_text_json(record->id),
                                           "seq", (json_int_t)record->seq, "withdrawn",
                                           (int)item_is_withdrawn(record)));
}

static void run_list(struct read_job *base)
{
    struct list_job *job = (struct list_job *)base;
    struct workspaces *workspaces = engine_workspaces(base->methods->engine);
    struct workspace *workspace = workspaces_borrow(workspaces);
    struct store_view *view = NULL;
    struct store_error error = {0};
    uint64_t next = 0;
    job->items = json_array();
    if (!workspace || !job->items) {
        if (workspace) {
            workspaces_return(workspaces, workspace);
        }
        return; /* no result: no memory */
    }
    if (read_job_view(base, &view) == 0) {
        int code = items_changed(view, job->since, (size_t)job->most, add_item, job,
                                 &workspace->buffer, &next, &error);
        store_end(view);
        if (code == STORE_OK) {
            base->result = json_pack("{s:O, s:I}", "items", job->items, "next", (json_int_t)next);
        } else if (error.code != STORE_OK) {
            (void)read_job_fail(base, &error); /* told at the end */
        }
    }
    workspaces_return(workspaces, workspace);
}

static int read_list_request(struct list_job *job, const json_t *params, struct fault *fault)
{
    static const char *const MEMBERS[] = {"since", "most", NULL};
    job->most = 1000;
    if (params_known(params, MEMBERS, fault) < 0 ||
        params_whole(params, "since", 0, INT64_MAX, &job->since, fault) < 0 ||
        params_whole(params, "most", 1, LIST_MOST, &job->most, fault) < 0) {
        return fault->code;
    }
    return 0;
}

void item_list(struct call *call, const json_t *params)
{
    struct list_job *job = read_job_new(call, params, sizeof *job);
    if (!job) {
        return;
    }
    job->job.run = run_list;
    job->job.release = release_list;
    read_job_start(&job->job, read_list_request(job, params, &job->job.fault));
}
