/*
 * tag.show and tag.list: the vocabulary as it is, with what is to be expected of each tag.
 */
#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/answer.h"
#include "daemon/grow.h"
#include "daemon/params.h"
#include "daemon/read_job.h"
#include "daemon/tag_json.h"

enum {
    LIST_MOST = 10000
};

/* The tag of a name that a member of params holds. */
static int find_tag(struct read_job *job, struct store_view *view, const char *pointer,
                    struct store_text name, struct vocabulary_tag *ret_tag)
{
    struct store_error error = {0};
    int code = vocabulary_find(view, name.data, name.size, ret_tag, &error);
    if (code == STORE_NOT_FOUND) {
        return fault_set(&job->fault, FAULT_NOT_FOUND, pointer, "There is no tag '%.*s'.",
                         (int)name.size, name.data);
    }
    return code == STORE_OK ? 0 : read_job_fail(job, &error);
}

/* --- tag.show -----------------------------------------------------------------------------------
 */

struct show_job {
    struct read_job job; /* first */
    struct store_text tag;
};

static void run_show(struct read_job *base)
{
    struct show_job *job = (struct show_job *)base;
    struct store_view *view = NULL;
    struct outlook outlook;
    struct vocabulary_tag tag;
    if (read_job_view(base, &view) < 0) {
        return;
    }
    if (find_tag(base, view, "/tag", job->tag, &tag) == 0 &&
        outlook_begin(base->methods->engine, store_view_totals(view).items, &outlook) == 0) {
        base->result = tag_json(&outlook, &tag);
    }
    store_end(view);
}

static int read_show_request(struct show_job *job, const json_t *params, struct fault *fault)
{
    static const char *const MEMBERS[] = {"tag", NULL};
    int code = params_known(params, MEMBERS, fault);
    return code < 0 ? code : params_name(params, "tag", &job->tag, fault);
}

void tag_show(struct call *call, const json_t *params)
{
    struct show_job *job = read_job_new(call, params, sizeof *job);
    if (!job) {
        return;
    }
    job->job.run = run_show;
    read_job_start(&job->job, read_show_request(job, params, &job->job.fault));
}

/* --- tag.list -----------------------------------------------------------------------------------
 */

enum list_order {
    ORDER_NAME,
    ORDER_COUNT,
    ORDER_MISSING
};

/* A tag's place in an order by number: falling key, then in the order in which tags were opened. */
struct ranked {
    double key;
    uint32_t number;
};

struct list_job {
    struct read_job job; /* first */
    struct store_text after;
    uint64_t most;
    size_t order; /* enum list_order */

    struct outlook outlook;
    json_t *tags;
    struct vocabulary_tag last; /* of those listed */
    bool has_more;
    struct ranked *ranked;
    size_t ranked_count;
    size_t ranked_capacity;
};

static void release_list(struct read_job *base)
{
    struct list_job *job = (struct list_job *)base;
    json_decref(job->tags);
    free(job->ranked);
}

/* Lists one more tag; 1 once there are enough. */
static int add_tag(struct list_job *job, const struct vocabulary_tag *tag)
{
    if (json_array_size(job->tags) == job->most) {
        job->has_more = true;
        return 1;
    }
    job->last = *tag;
    return json_array_append_new(job->tags,
                                 json_pack("{s:s, s:o, s:f, s:f, s:s}", "tag", tag->name, "count",
                                           answer_count(tag->counts.count), "p",
                                           outlook_propensity_mean(&job->outlook, &tag->counts),
                                           "missing", outlook_missing(&job->outlook, &tag->counts),
                                           "state", tag_state_name(tag->state)));
}

static int add_by_name(void *user, const struct vocabulary_tag *tag)
{
    return add_tag(user, tag);
}

static struct ranked rank_of(const struct list_job *job, const struct vocabulary_tag *tag)
{
    double key = job->order == ORDER_COUNT ? (double)tag->counts.count
                                           : outlook_missing(&job->outlook, &tag->counts);
    return (struct ranked){.key = key, .number = tag->number};
}

static int compare_ranked(const void *left, const void *right)
{
    const struct ranked *a = left;
    const struct ranked *b = right;
    if (a->key != b->key) {
        return a->key > b->key ? -1 : 1;
    }
    return (a->number > b->number) - (a->number < b->number);
}

static int add_ranked(void *user, const struct vocabulary_tag *tag)
{
    struct list_job *job = user;
    if (GROW(&job->ranked, &job->ranked_capacity, job->ranked_count + 1) < 0) {
        return -ENOMEM;
    }
    job->ranked[job->ranked_count++] = rank_of(job, tag);
    return 0;
}

/* Pages go by the tag they ended with, wherever it stands now: counts move between two pages. */
static int list_ranked(struct list_job *job, struct store_view *view, struct store_error *error)
{
    struct vocabulary_tag tag;
    struct ranked after = {0};
    if (job->after.size > 0) {
        if (find_tag(&job->job, view, "/after", job->after, &tag) < 0) {
            return -1;
        }
        after = rank_of(job, &tag);
    }
    int code = vocabulary_by_number(view, add_ranked, job, error);
    if (code == 0 && job->ranked_count > 0) {
        qsort(job->ranked, job->ranked_count, sizeof *job->ranked, compare_ranked);
    }
    for (size_t i = 0; i < job->ranked_count && code == 0; i++) {
        if (job->after.size > 0 && compare_ranked(&job->ranked[i], &after) <= 0) {
            continue;
        }
        code = vocabulary_get(view, job->ranked[i].number, &tag, error);
        if (code == 0) {
            code = add_tag(job, &tag);
        }
    }
    return code;
}

static void run_list(struct read_job *base)
{
    struct list_job *job = (struct list_job *)base;
    struct store_view *view = NULL;
    struct store_error error = {0};
    job->tags = json_array();
    if (!job->tags || read_job_view(base, &view) < 0) {
        return;
    }
    if (outlook_begin(base->methods->engine, store_view_totals(view).items, &job->outlook) < 0) {
        store_end(view);
        return; /* no result: no memory */
    }
    int code = job->order == ORDER_NAME ? vocabulary_by_name(view, job->after.data, job->after.size,
                                                             add_by_name, job, &error)
                                        : list_ranked(job, view, &error);
    store_end(view);
    if (error.code != STORE_OK) {
        (void)read_job_fail(base, &error); /* told at the end */
    } else if (code >= 0) {
        base->result = json_pack("{s:O}", "tags", job->tags);
        if (base->result && job->has_more &&
            json_object_set_new(base->result, "next", json_string(job->last.name)) < 0) {
            json_decref(base->result);
            base->result = NULL;
        }
    }
}

static int read_list_request(struct list_job *job, const json_t *params, struct fault *fault)
{
    static const char *const MEMBERS[] = {"after", "most", "order", NULL};
    static const char *const ORDERS[] = {
        [ORDER_NAME] = "name", [ORDER_COUNT] = "count", [ORDER_MISSING] = "missing", NULL};
    job->most = 1000;
    if (params_known(params, MEMBERS, fault) < 0 ||
        params_optional_name(params, "after", &job->after, fault) < 0 ||
        params_whole(params, "most", 1, LIST_MOST, &job->most, fault) < 0 ||
        params_choice(params, "order", ORDERS, &job->order, fault) < 0) {
        return fault->code;
    }
    return 0;
}

void tag_list(struct call *call, const json_t *params)
{
    struct list_job *job = read_job_new(call, params, sizeof *job);
    if (!job) {
        return;
    }
    job->job.run = run_list;
    job->job.release = release_list;
    read_job_start(&job->job, read_list_request(job, params, &job->job.fault));
}
