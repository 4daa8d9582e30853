/*
 * desk.worklist: the filed items most worth an editor's minute.
 */
#include <errno.h>
#include <stdlib.h>

#include "daemon/answer.h"
#include "daemon/item_json.h"
#include "daemon/params.h"
#include "daemon/read_job.h"
#include "storage/vocabulary.h"

enum {
    MOST = 1000
};

/* An entry as the model has it now. */
struct listed {
    struct worklist_entry entry;
    double chances[WORKLIST_GAPS];
};

struct worklist_job {
    struct read_job job; /* first */
    struct store_text tag;
    struct store_text after;
    uint64_t most;
    double floor;

    struct workspace *workspace;
    uint32_t tag_number;   /* or MODEL_ANY_TAG */
    uint64_t after_number; /* of the item that the last page ended with; 0: none */

    int code;            /* of the ranking */
    struct listed *page; /* the items from where it begins on */
    size_t page_count;
    double running;       /* of all before */
    bool has_more;        /* behind the page */
    bool is_after_listed; /* or nothing was to be found */
    uint64_t learned;
    size_t kept;
};

static void release(struct read_job *base)
{
    struct worklist_job *job = (struct worklist_job *)base;
    free(job->page);
    if (job->workspace) {
        workspaces_return(engine_workspaces(base->methods->engine), job->workspace);
    }
}

/* --- under the model's lock ---------------------------------------------------------------------
 */

/* Where the page begins: behind the item that the last one ended with. */
static size_t find_start(struct worklist_job *job, const struct model_ranked *ranked, size_t count)
{
    job->is_after_listed = job->after_number == 0;
    size_t start = 0;
    while (!job->is_after_listed && start < count) {
        job->running += ranked[start].expected;
        job->is_after_listed = ranked[start++].number == job->after_number;
    }
    return start;
}

/* Copies the page out with today's chances, so that it is of one moment. */
static int copy_page(struct worklist_job *job, const struct model *model, const struct base *base,
                     const struct model_ranked *ranked, size_t count)
{
    size_t left = count - find_start(job, ranked, count);
    const struct model_ranked *first = ranked + (count - left);
    job->page_count = left < job->most ? left : (size_t)job->most;
    job->has_more = left > job->page_count;
    job->page = calloc(job->page_count + 1, sizeof *job->page);
    if (!job->page) {
        return -ENOMEM;
    }
    for (size_t i = 0; i < job->page_count; i++) {
        struct listed *listed = &job->page[i];
        int result = model_find_entry(model, base, first[i].number, &listed->entry);
        if (result < 0) {
            return result == -ENOENT ? -EIO : result; /* it has just been ranked */
        }
        for (uint32_t g = 0; g < listed->entry.gap_count; g++) {
            listed->chances[g] = model_gap_chance(model, &listed->entry, &listed->entry.gaps[g]);
        }
    }
    return 0;
}

static void rank(void *user, const struct model *model, const struct base *base, uint64_t learned)
{
    struct worklist_job *job = user;
    struct model_ranked *ranked = NULL;
    size_t count = 0;
    job->learned = learned;
    job->kept = worklist_size(model_worklist(model));
    job->code = model_rank_worklist(model, base, job->tag_number, job->floor, &ranked, &count);
    if (job->code == 0) {
        job->code = copy_page(job, model, base, ranked, count);
    }
    free(ranked);
}

/* --- one item -----------------------------------------------------------------------------------
 */

/* The best gap that has not been told of yet; WORKLIST_GAPS where none is left. */
static size_t best_gap(const struct worklist_job *job, const struct listed *listed)
{
    size_t best = WORKLIST_GAPS;
    for (size_t i = 0; i < listed->entry.gap_count; i++) {
        bool is_wanted =
            job->tag_number == MODEL_ANY_TAG || job->tag_number == listed->entry.gaps[i].tag;
        if (is_wanted && listed->chances[i] >= job->floor && listed->chances[i] > 0.0 &&
            (best == WORKLIST_GAPS || listed->chances[i] > listed->chances[best])) {
            best = i;
        }
    }
    return best;
}

static int add_gaps(struct worklist_job *job, struct store_view *view, struct listed *listed,
                    json_t **gaps, double *expected)
{
    struct store_error error = {0};
    struct vocabulary_tag tag;
    size_t best = best_gap(job, listed);
    while (best < WORKLIST_GAPS) {
        if (vocabulary_get(view, listed->entry.gaps[best].tag, &tag, &error) != STORE_OK) {
            return read_job_fail(&job->job, &error);
        }
        answer_append(gaps,
                      json_pack("{s:s, s:f}", "tag", tag.name, "chance", listed->chances[best]));
        *expected += listed->chances[best];
        listed->chances[best] = -1.0; /* told of */
        best = best_gap(job, listed);
    }
    return 0;
}

/* Whether the item is still what the model has seen; reads it. */
static int is_present(struct worklist_job *job, struct store_view *view, uint64_t number,
                      bool *ret_present)
{
    struct store_error error = {0};
    struct workspace *workspace = job->workspace;
    uint64_t seq = 0;
    int code = items_read(view, number, &workspace->buffer, &workspace->record, &error);
    if (code == STORE_OK) {
        code = items_find(view, workspace->record.id, &seq, &error);
    }
    *ret_present = code == STORE_OK && seq == number;
    return code == STORE_OK || code == STORE_NOT_FOUND ? 0 : read_job_fail(&job->job, &error);
}

/* Adds the item to the page, if it is still there. */
static int add_item(struct worklist_job *job, struct store_view *view, struct listed *listed,
                    json_t **items)
{
    bool is_here = false;
    double expected = 0.0;
    int code = is_present(job, view, listed->entry.number, &is_here);
    if (code < 0 || !is_here) {
        return code;
    }
    json_t *gaps = json_array();
    if (add_gaps(job, view, listed, &gaps, &expected) < 0) {
        json_decref(gaps);
        return job->job.fault.code;
    }
    job->running += expected;
    json_t *item = json_object();
    answer_add(&item, "id", item_text_json(job->workspace->record.id));
    answer_add(&item, "title", item_text_json(job->workspace->record.title));
    answer_add(&item, "gaps", gaps);
    answer_add(&item, "expected", answer_number(expected));
    answer_add(&item, "running", answer_number(job->running));
    answer_add(&item, "scored_seq", answer_count(listed->entry.scored));
    answer_append(items, item);
    return 0;
}

/* --- the page -----------------------------------------------------------------------------------
 */

static json_t *page_json(struct worklist_job *job, struct store_view *view)
{
    json_t *items = json_array();
    int code = 0;
    for (size_t i = 0; i < job->page_count && code == 0; i++) {
        code = add_item(job, view, &job->page[i], &items);
    }
    if (code < 0) {
        json_decref(items);
        return NULL;
    }
    json_t *result = json_object();
    size_t count = json_array_size(items);
    if (job->has_more && count > 0) {
        answer_add(&result, "next",
                   json_incref(json_object_get(json_array_get(items, count - 1), "id")));
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

static int fail_after(struct worklist_job *job)
{
    return fault_set(&job->job.fault, FAULT_NOT_FOUND, "/after",
                     "The item '%.*s' is not in this worklist (any more): begin again without "
                     "after.",
                     (int)job->after.size, job->after.data);
}

static int find_after(struct worklist_job *job, struct store_view *view)
{
    struct store_error error = {0};
    if (job->after.size == 0) {
        return 0;
    }
    int code = items_find(view, job->after, &job->after_number, &error);
    if (code == STORE_NOT_FOUND) {
        return fail_after(job);
    }
    return code == STORE_OK ? 0 : read_job_fail(&job->job, &error);
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
    if (code == 0) {
        code = find_after(job, view);
    }
    store_end(view); /* ranking may take a while, and what it finds may be newer than this view */
    if (code < 0 || engine_read_model(engine, rank, job) < 0 || job->code < 0) {
        if (job->code == -EIO) {
            (void)read_job_fail_model(base);
        }
        return;
    }
    if (!job->is_after_listed) {
        (void)fail_after(job); /* told at the end */
        return;
    }
    if (read_job_view(base, &view) == 0) {
        base->result = page_json(job, view);
        store_end(view);
    }
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
