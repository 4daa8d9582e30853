/*
 * desk.worklist: the filed items most worth an editor's minute.
 */
#include <stdlib.h>

#include "daemon/answer.h"
#include "daemon/params.h"
#include "daemon/read_job.h"
#include "storage/vocabulary.h"

enum {
    MOST = 1000
};

struct worklist_job {
    struct read_job job; /* first */
    struct store_text tag;
    struct store_text after;
    uint64_t most;
    double floor;

    struct workspace *workspace;
    uint32_t tag_number; /* or MODEL_ANY_TAG */
    int code;            /* of the ranking */
    struct model_ranked *ranked;
    size_t ranked_count;
    struct worklist_entry entry; /* the one being told of */
    double chances[WORKLIST_GAPS];
    uint64_t wanted; /* its number */
    uint64_t learned;
    size_t kept;
};

static void release(struct read_job *base)
{
    struct worklist_job *job = (struct worklist_job *)base;
    free(job->ranked);
    if (job->workspace) {
        workspaces_return(engine_workspaces(base->methods->engine), job->workspace);
    }
}

/* --- under the model's lock ---------------------------------------------------------------------
 */

static void rank(void *user, const struct model *model, uint64_t learned)
{
    struct worklist_job *job = user;
    job->learned = learned;
    job->kept = worklist_size(model_worklist(model));
    job->code =
        model_rank_worklist(model, job->tag_number, job->floor, &job->ranked, &job->ranked_count);
}

/* Copies the wanted entry out, with today's chances; without gaps where it is gone. */
static void read_entry(void *user, const struct model *model, uint64_t learned)
{
    (void)learned;
    struct worklist_job *job = user;
    const struct worklist_entry *entry = worklist_find(model_worklist(model), job->wanted);
    job->entry = entry ? *entry : (struct worklist_entry){.number = job->wanted};
    for (uint32_t i = 0; i < job->entry.gap_count; i++) {
        job->chances[i] = model_gap_chance(model, &job->entry, &job->entry.gaps[i]);
    }
}

/* --- one item -----------------------------------------------------------------------------------
 */

/* The best gap that has not been told of yet; WORKLIST_GAPS where none is left. */
static size_t best_gap(const struct worklist_job *job)
{
    size_t best = WORKLIST_GAPS;
    for (size_t i = 0; i < job->entry.gap_count; i++) {
        bool is_wanted =
            job->tag_number == MODEL_ANY_TAG || job->tag_number == job->entry.gaps[i].tag;
        if (is_wanted && job->chances[i] >= job->floor && job->chances[i] > 0.0 &&
            (best == WORKLIST_GAPS || job->chances[i] > job->chances[best])) {
            best = i;
        }
    }
    return best;
}

static int gaps_json(struct worklist_job *job, struct store_view *view, json_t **gaps,
                     double *expected)
{
    struct store_error error = {0};
    struct vocabulary_tag tag;
    for (size_t best = best_gap(job); best < WORKLIST_GAPS; best = best_gap(job)) {
        if (vocabulary_get(view, job->entry.gaps[best].tag, &tag, &error) != STORE_OK) {
            return read_job_fail(&job->job, &error);
        }
        answer_append(gaps, json_pack("{s:s, s:f}", "tag", tag.name, "chance", job->chances[best]));
        *expected += job->chances[best];
        job->chances[best] = -1.0; /* told of */
    }
    return 0;
}

/* Whether the item is still what the model has seen; reads it. */
static int is_present(struct worklist_job *job, struct store_view *view, bool *ret_present)
{
    struct store_error error = {0};
    struct workspace *workspace = job->workspace;
    uint64_t seq = 0;
    int code = items_read(view, job->wanted, &workspace->buffer, &workspace->record, &error);
    if (code == STORE_OK) {
        code = items_find(view, workspace->record.id, &seq, &error);
    }
    *ret_present = code == STORE_OK && seq == job->wanted;
    return code == STORE_OK || code == STORE_NOT_FOUND ? 0 : read_job_fail(&job->job, &error);
}

static json_t *text_json(struct store_text text)
{
    return json_stringn(text.size > 0 ? text.data : "", text.size);
}

/* Adds the item to the page, if it is still there and promises something. */
static int add_item(struct worklist_job *job, struct store_view *view, json_t **items,
                    double *running)
{
    bool is_here = false;
    double expected = 0.0;
    if (is_present(job, view, &is_here) < 0) {
        return job->job.fault.code;
    }
    if (!is_here || engine_read_model(job->job.methods->engine, read_entry, job) < 0) {
        return 0;
    }
    json_t *gaps = json_array();
    if (gaps_json(job, view, &gaps, &expected) < 0) {
        json_decref(gaps);
        return job->job.fault.code;
    }
    if (expected <= 0.0) {
        json_decref(gaps);
        return 0;
    }
    *running += expected;
    json_t *item = json_object();
    answer_add(&item, "id", text_json(job->workspace->record.id));
    answer_add(&item, "title", text_json(job->workspace->record.title));
    answer_add(&item, "gaps", gaps);
    answer_add(&item, "expected", answer_number(expected));
    answer_add(&item, "running", answer_number(*running));
    answer_add(&item, "scored_seq", answer_count(job->entry.scored));
    answer_append(items, item);
    return 0;
}

/* --- the page -----------------------------------------------------------------------------------
 */

/* Where the page begins: behind the item that the last one ended with. */
static int find_start(struct worklist_job *job, struct store_view *view, size_t *ret_at,
                      double *ret_running)
{
    struct store_error error = {0};
    uint64_t seq = 0;
    if (job->after.size == 0) {
        return 0;
    }
    int code = items_find(view, job->after, &seq, &error);
    if (code != STORE_OK && code != STORE_NOT_FOUND) {
        return read_job_fail(&job->job, &error);
    }
    for (size_t i = 0; i < job->ranked_count && code == STORE_OK; i++) {
        *ret_running += job->ranked[i].expected;
        if (job->ranked[i].number == seq) {
            *ret_at = i + 1;
            return 0;
        }
    }
    return fault_set(&job->job.fault, FAULT_NOT_FOUND, "/after",
                     "The item '%.*s' is not in this worklist (any more): begin again without "
                     "after.",
                     (int)job->after.size, job->after.data);
}

static json_t *page_json(struct worklist_job *job, struct store_view *view)
{
    size_t at = 0;
    double running = 0.0;
    json_t *items = json_array();
    int code = find_start(job, view, &at, &running);
    for (; at < job->ranked_count && json_array_size(items) < job->most && code == 0; at++) {
        job->wanted = job->ranked[at].number;
        code = add_item(job, view, &items, &running);
    }
    if (code < 0) {
        json_decref(items);
        return NULL;
    }
    json_t *result = json_object();
    size_t count = json_array_size(items);
    json_t *last = count > 0 ? json_array_get(items, count - 1) : NULL;
    if (last && at < job->ranked_count) {
        answer_add(&result, "next", json_incref(json_object_get(last, "id")));
    }
    answer_add(&result, "items", items);
    answer_add(&result, "learned", answer_count(job->learned));
    answer_add(&result, "kept", answer_count(job->kept));
    return result;
}

static int find_tag(struct worklist_job *job, struct store_view *view)
{
    struct store_error error = {0};
    struct vocabulary_tag tag;
    job->tag_number = MODEL_ANY_TAG;
    if (job->tag.size == 0) {
        return 0;
    }
    int code = vocabulary_find(view, job->tag.data, job->tag.size, &tag, &error);
    if (code == STORE_NOT_FOUND) {
        return fault_set(&job->job.fault, FAULT_NOT_FOUND, "/tag", "There is no tag '%.*s'.",
                         (int)job->tag.size, job->tag.data);
    }
    if (code != STORE_OK) {
        return read_job_fail(&job->job, &error);
    }
    job->tag_number = tag.number;
    return 0;
}

static void run(struct read_job *base)
{
    struct worklist_job *job = (struct worklist_job *)base;
    struct engine *engine = base->methods->engine;
    struct store_view *view = NULL;
    job->workspace = workspaces_borrow(engine_workspaces(engine));
    if (!job->workspace || read_job_view(base, &view) < 0) {
        return;
    }
    int code = find_tag(job, view);
    store_end(view); /* ranking may take a while, and what it finds may be newer than this view */
    if (code < 0 || engine_read_model(engine, rank, job) < 0 || job->code < 0 ||
        read_job_view(base, &view) < 0) {
        return;
    }
    base->result = page_json(job, view);
    store_end(view);
}

static int read_request(struct worklist_job *job, const json_t *params, struct fault *fault)
{
    static const char *const MEMBERS[] = {"tag", "most", "after", "floor", NULL};
    job->most = 50;
    job->floor = 0.2;
    if (params_known(params, MEMBERS, fault) < 0 ||
        params_optional_name(params, "tag", &job->tag, fault) < 0 ||
        params_whole(params, "most", 1, MOST, &job->most, fault) < 0 ||
        params_optional_name(params, "after", &job->after, fault) < 0 ||
        params_share(params, "floor", &job->floor, fault) < 0) {
        return fault->code;
    }
    return 0;
}

void desk_worklist(struct call *call, const json_t *params)
{
    struct worklist_job *job = read_job_new(call, params, sizeof *job);
    if (!job) {
        return;
    }
    job->job.run = run;
    job->job.release = release;
    read_job_start(&job->job, read_request(job, params, &job->job.fault));
}
