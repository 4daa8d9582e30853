/*
 * item.show and item.list: items as they are stored.
 */
#include "daemon/item_read.h"

#include <stdlib.h>
#include <string.h>

#include "daemon/answer.h"
#include "daemon/params.h"
#include "daemon/times.h"
#include "storage/vocabulary.h"

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

struct named {
    json_t *name;
};

static int compare_names(const void *left, const void *right)
{
    return strcmp(json_string_value(((const struct named *)left)->name),
                  json_string_value(((const struct named *)right)->name));
}

/* The names of tags, in the order of their bytes. NULL: the job holds a fault. */
static json_t *names_json(struct read_job *job, struct store_view *view, struct numbers tags)
{
    struct store_error error = {0};
    struct vocabulary_tag tag;
    json_t *names = json_array();
    struct named *sorted = calloc(tags.count + 1, sizeof *sorted);
    size_t made = 0;
    int code = names && sorted ? 0 : -1;
    while (code == 0 && made < tags.count) {
        if (vocabulary_get(view, tags.list[made], &tag, &error) != STORE_OK) {
            code = read_job_fail(job, &error);
        } else {
            sorted[made].name = json_string(tag.name);
            code = sorted[made].name ? 0 : -1;
            made += code == 0;
        }
    }
    if (made > 0) {
        qsort(sorted, made, sizeof *sorted, compare_names);
    }
    for (size_t i = 0; i < made; i++) {
        code |= json_array_append_new(names, sorted[i].name);
    }
    free(sorted);
    if (code == 0) {
        return names;
    }
    (void)fault_set(&job->fault, FAULT_INTERNAL, NULL, "There is no memory for the answer.");
    json_decref(names);
    return NULL;
}

static json_t *text_json(struct store_text text)
{
    return json_stringn(text.size > 0 ? text.data : "", text.size);
}

static json_t *text_or_null(struct store_text text)
{
    return text.size > 0 ? text_json(text) : json_null();
}

static json_t *fields_json(struct store_text fields)
{
    return fields.size > 0 ? json_loadb(fields.data, fields.size, 0, NULL) : json_object();
}

static json_t *time_json(int64_t time_ms)
{
    char text[TIMES_BYTES];
    times_format(time_ms, text);
    return json_string(text);
}

/* The user that a change came from; null where that was not noted. */
static json_t *uid_json(uint32_t uid)
{
    return uid == ITEM_NO_UID ? json_null() : json_integer((json_int_t)uid);
}

static json_t *check_json(struct read_job *job, struct store_view *view,
                          const struct item_check *check)
{
    if (!check->is_there) {
        return json_null();
    }
    json_t *tags = names_json(job, view, check->tags);
    return tags ? json_pack("{s:o, s:s, s:o, s:o, s:o}", "tags", tags, "drawn",
                            check->is_random ? "random" : "picked", "at", time_json(check->at_ms),
                            "checker", text_or_null(check->checker), "uid", uid_json(check->uid))
                : NULL;
}

static json_t *seconds_json(struct read_job *job, struct store_view *view,
                            const struct item_record *record)
{
    json_t *seconds = json_array();
    for (size_t i = 0; seconds && i < record->second_count; i++) {
        const struct item_second *second = &record->seconds[i];
        json_t *tags = names_json(job, view, second->tags);
        json_t *entry = tags
                            ? json_pack("{s:o, s:o, s:o, s:o}", "tagger", text_json(second->tagger),
                                        "tags", tags, "filed_at", text_or_null(second->filed_at),
                                        "uid", uid_json(second->uid))
                            : NULL;
        if (json_array_append_new(seconds, entry) < 0) {
            json_decref(seconds);
            return NULL;
        }
    }
    return seconds;
}

static json_t *rulings_json(struct read_job *job, struct store_view *view,
                            const struct item_record *record)
{
    struct store_error error = {0};
    struct vocabulary_tag tag;
    json_t *rulings = json_array();
    for (size_t i = 0; rulings && i < record->ruling_count; i++) {
        const struct item_ruling *ruling = &record->rulings[i];
        json_t *entry = NULL;
        if (vocabulary_get(view, ruling->tag, &tag, &error) != STORE_OK) {
            (void)read_job_fail(job, &error); /* told at the end */
        } else {
            entry = json_pack("{s:s, s:b, s:o, s:o, s:o}", "tag", tag.name, "belongs",
                              (int)ruling->belongs, "editor", text_or_null(ruling->editor), "at",
                              time_json(ruling->at_ms), "uid", uid_json(ruling->uid));
        }
        if (json_array_append_new(rulings, entry) < 0) {
            json_decref(rulings);
            return NULL;
        }
    }
    return rulings;
}

static json_t *item_json(struct read_job *job, struct store_view *view,
                         const struct item_record *record)
{
    json_t *item = json_object();
    answer_add(&item, "id", text_json(record->id));
    answer_add(&item, "seq", json_integer((json_int_t)record->seq));
    answer_add(&item, "title", text_json(record->title));
    answer_add(&item, "text", text_json(record->text));
    answer_add(&item, "fields", fields_json(record->fields));
    answer_add(&item, "language", text_or_null(record->language));
    answer_add(&item, "tagger", text_or_null(record->tagger));
    answer_add(&item, "uid", uid_json(record->filed_uid));
    answer_add(&item, "filed_at", text_or_null(record->filed_at));
    answer_add(&item, "stored_at", time_json(record->filed_stored_at_ms));
    answer_add(&item, "tags", names_json(job, view, record->tags));
    answer_add(&item, "filed", names_json(job, view, record->filed));
    answer_add(&item, "prompted", names_json(job, view, record->prompted));
    answer_add(&item, "declined", names_json(job, view, record->declined));
    answer_add(&item, "belongs", names_json(job, view, record->belongs));
    answer_add(&item, "not", names_json(job, view, record->denied));
    answer_add(&item, "rulings", rulings_json(job, view, record));
    answer_add(&item, "checked", check_json(job, view, &record->check));
    answer_add(&item, "second", seconds_json(job, view, record));
    return item;
}

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
            base->result = item_json(base, view, &workspace->record);
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
                                 json_pack("{s:o, s:I, s:b}", "id", text_json(record->id), "seq",
                                           (json_int_t)record->seq, "withdrawn",
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
