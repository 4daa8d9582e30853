/*
 * item.file and item.withdraw: requests into changes.
 */
#include <string.h>

#include "daemon/change_job.h"
#include "daemon/pointer.h"

/* --- item.file ----------------------------------------------------------------------------------
 */

static int read_tags(struct change_job *job, const json_t *params, size_t tags_limit,
                     struct fault *fault)
{
    if (!params_has(params, "tags")) {
        return fault_set(fault, FAULT_PARAMS, "/tags", "tags is missing.");
    }
    if (params_names(params, "tags", &job->tags, fault) < 0 ||
        params_names(params, "prompted", &job->prompted, fault) < 0 ||
        params_names(params, "declined", &job->declined, fault) < 0) {
        return fault->code;
    }
    if (job->tags.count > tags_limit || job->declined.count > tags_limit) {
        return fault_set(fault, FAULT_LIMIT, job->tags.count > tags_limit ? "/tags" : "/declined",
                         "An item has at most tags_limit tags, which is %zu.", tags_limit);
    }
    for (size_t i = 0; i < job->prompted.count; i++) {
        if (!params_names_hold(&job->tags, job->prompted.names[i])) {
            return change_job_name_fault(fault, "prompted", job->prompted.given_at[i],
                                         "prompted holds only tags that are among tags.");
        }
    }
    for (size_t i = 0; i < job->declined.count; i++) {
        if (params_names_hold(&job->tags, job->declined.names[i])) {
            return change_job_name_fault(fault, "declined", job->declined.given_at[i],
                                         "declined holds only tags that are not among tags.");
        }
    }
    return 0;
}

static int read_fields(struct change_job *job, const json_t *params, size_t text_limit,
                       struct fault *fault)
{
    const json_t *fields = json_object_get(params, "fields");
    if (!fields) {
        return 0;
    }
    if (fields_check(fields, "/fields", fault) < 0) {
        return fault->code;
    }
    job->fields = fields_canonical(fields);
    if (!job->fields || field_list_fill(&job->field_list, fields) < 0) {
        return fault_set(fault, FAULT_INTERNAL, NULL, "There is no memory for fields.");
    }
    struct store_text text = {.data = job->fields, .size = strlen(job->fields)};
    if (text.size > text_limit) {
        return fault_set(fault, FAULT_LIMIT, "/fields",
                         "fields is longer than text_limit, %zu bytes.", text_limit);
    }
    job->change.filing.fields = text;
    return 0;
}

/*
 * A text of n bytes holds at most n / 2 + 1 words and as many pairs of words; only where that is
 * over the limit must the words be counted, which the writer does.
 */
static void have_words_counted(struct change_job *job, size_t words_limit)
{
    const struct item_filing *filing = &job->change.filing;
    size_t most = filing->title.size + filing->text.size + 4 + job->field_list.count;
    if (most <= words_limit) {
        return;
    }
    memcpy(job->language, filing->language.data, filing->language.size);
    job->source =
        (struct features_source){.title = filing->title.data,
                                 .title_bytes = filing->title.size,
                                 .text = filing->text.data,
                                 .text_bytes = filing->text.size,
                                 .language = filing->language.size > 0 ? job->language : NULL,
                                 .fields = job->field_list.entries,
                                 .field_count = job->field_list.count};
    job->change.counted = &job->source;
    job->change.words_limit = words_limit;
}

/* What an independent tagging may not say: the first filing has said it, or it would not be
 * independent. */
static int check_independent(const json_t *params, struct fault *fault)
{
    static const char *const OTHERS[] = {"prompted", "declined", NULL};
    for (size_t i = 0; OTHERS[i]; i++) {
        if (params_has(params, OTHERS[i])) {
            char pointer[FAULT_FIELD_BYTES];
            pointer_to_member(pointer, sizeof pointer, "", OTHERS[i]);
            return fault_set(fault, FAULT_PARAMS, pointer,
                             "An independent tagging is made without proposals: leave out %s.",
                             OTHERS[i]);
        }
    }
    if (!params_has(params, "tagger")) {
        return fault_set(fault, FAULT_PARAMS, "/tagger",
                         "An independent tagging names its tagger, another than the first.");
    }
    return 0;
}

static int read_independent(struct change_job *job, const json_t *params, struct fault *fault)
{
    bool is_independent = false;
    if (params_flag(params, "independent", &is_independent, fault) < 0) {
        return fault->code;
    }
    if (!is_independent) {
        return 0;
    }
    job->change.kind = CHANGE_TAG_AGAIN;
    return check_independent(params, fault);
}

static int read_filing(struct change_job *job, const json_t *params, struct fault *fault)
{
    static const char *const MEMBERS[] = {"id",          "tags",     "title",    "text",
                                          "fields",      "language", "tagger",   "filed_at",
                                          "independent", "prompted", "declined", NULL};
    struct item_filing *filing = &job->change.filing;
    size_t text_limit = job->options->text_limit_bytes;
    if (params_known(params, MEMBERS, fault) < 0 ||
        params_name(params, "id", &filing->id, fault) < 0 ||
        read_independent(job, params, fault) < 0 ||
        read_tags(job, params, job->options->tags_limit, fault) < 0 ||
        params_text(params, "title", text_limit, "text_limit", &filing->title, fault) < 0 ||
        params_text(params, "text", text_limit, "text_limit", &filing->text, fault) < 0 ||
        read_fields(job, params, text_limit, fault) < 0 ||
        params_language(params, "language", &filing->language, fault) < 0 ||
        params_optional_name(params, "tagger", &filing->tagger, fault) < 0 ||
        params_time(params, "filed_at", job->filed_at, fault) < 0) {
        return fault->code;
    }
    filing->filed_at = (struct store_text){.data = job->filed_at, .size = strlen(job->filed_at)};
    filing->open_unknown = job->options->open_unknown_tags;
    change_job_use_names(job);
    have_words_counted(job, job->options->words_limit);
    return 0;
}

void item_file(struct call *call, const json_t *params)
{
    struct fault fault = {0};
    struct change_job *job = change_job_new(call, CHANGE_FILE);
    if (job) {
        change_job_start_take(job, read_filing(job, params, &fault), &fault);
    }
}

/* --- item.withdraw ------------------------------------------------------------------------------
 */

static int read_withdrawal(struct change_job *job, const json_t *params, struct fault *fault)
{
    static const char *const MEMBERS[] = {"id", NULL};
    if (params_known(params, MEMBERS, fault) < 0) {
        return fault->code;
    }
    return params_name(params, "id", &job->change.filing.id, fault);
}

void item_withdraw(struct call *call, const json_t *params)
{
    struct fault fault = {0};
    struct change_job *job = change_job_new(call, CHANGE_WITHDRAW);
    if (job) {
        change_job_start_take(job, read_withdrawal(job, params, &fault), &fault);
    }
}
