/*
 * item.file and item.withdraw: requests into changes, and what became of them into answers.
 */
#include <stdlib.h>
#include <string.h>

#include "daemon/clock.h"
#include "daemon/fields.h"
#include "daemon/methods_private.h"
#include "daemon/params.h"
#include "daemon/pointer.h"
#include "daemon/read_job.h"

/* A change on its way, with everything that its filing points to. */
struct change_job {
    struct change change; /* first, so that the one leads to the other */
    struct call *call;
    struct params_names tags;
    struct params_names prompted;
    struct params_names declined;
    char *fields;
    struct field_list field_list;
    struct features_source source;
    char filed_at[PARAMS_TIME_BYTES];
    char language[PARAMS_LANGUAGE_BYTES + 1];
};

static void free_job(struct change_job *job)
{
    params_names_deinit(&job->tags);
    params_names_deinit(&job->prompted);
    params_names_deinit(&job->declined);
    field_list_deinit(&job->field_list);
    free(job->fields);
    free(job);
}

/* --- requests -----------------------------------------------------------------------------------
 */

static int name_fault(struct fault *fault, const char *list, size_t at, const char *sentence)
{
    char base[FAULT_FIELD_BYTES];
    char pointer[FAULT_FIELD_BYTES];
    pointer_to_member(base, sizeof base, "", list);
    pointer_to_element(pointer, sizeof pointer, base, at);
    return fault_set(fault, FAULT_PARAMS, pointer, "%s", sentence);
}

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
            return name_fault(fault, "prompted", job->prompted.given_at[i],
                              "prompted holds only tags that are among tags.");
        }
    }
    for (size_t i = 0; i < job->declined.count; i++) {
        if (params_names_hold(&job->tags, job->declined.names[i])) {
            return name_fault(fault, "declined", job->declined.given_at[i],
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

static int read_filing(struct change_job *job, const json_t *params, const struct options *options,
                       struct fault *fault)
{
    static const char *const MEMBERS[] = {"id",       "tags",     "title",  "text",
                                          "fields",   "language", "tagger", "filed_at",
                                          "prompted", "declined", NULL};
    struct item_filing *filing = &job->change.filing;
    size_t text_limit = options->text_limit_bytes;
    if (params_known(params, MEMBERS, fault) < 0 ||
        params_name(params, "id", &filing->id, fault) < 0 ||
        read_tags(job, params, options->tags_limit, fault) < 0 ||
        params_text(params, "title", text_limit, "text_limit", &filing->title, fault) < 0 ||
        params_text(params, "text", text_limit, "text_limit", &filing->text, fault) < 0 ||
        read_fields(job, params, text_limit, fault) < 0 ||
        params_language(params, "language", &filing->language, fault) < 0 ||
        params_optional_name(params, "tagger", &filing->tagger, fault) < 0 ||
        params_time(params, "filed_at", job->filed_at, fault) < 0) {
        return fault->code;
    }
    filing->filed_at = (struct store_text){.data = job->filed_at, .size = strlen(job->filed_at)};
    filing->tags = job->tags.names;
    filing->tag_count = job->tags.count;
    filing->prompted = job->prompted.names;
    filing->prompted_count = job->prompted.count;
    filing->declined = job->declined.names;
    filing->declined_count = job->declined.count;
    filing->open_unknown = options->open_unknown_tags;
    have_words_counted(job, options->words_limit);
    return 0;
}

static int read_withdrawal(struct change_job *job, const json_t *params, struct fault *fault)
{
    static const char *const MEMBERS[] = {"id", NULL};
    if (params_known(params, MEMBERS, fault) < 0) {
        return fault->code;
    }
    return params_name(params, "id", &job->change.filing.id, fault);
}

static void start(struct call *call, const json_t *params, enum change_kind kind)
{
    struct methods *methods = call_context(call);
    struct fault fault = {0};
    struct change_job *job = calloc(1, sizeof *job);
    if (!job) {
        (void)fault_set(&fault, FAULT_INTERNAL, NULL, "There is no memory for the request.");
        call_fail(call, &fault);
        return;
    }
    job->call = call;
    job->change.kind = kind;
    job->change.filing.stored_at_ms = clock_wall_ms();
    job->change.filing.uid = call_uid(call);
    int code = kind == CHANGE_FILE ? read_filing(job, params, methods->options, &fault)
                                   : read_withdrawal(job, params, &fault);
    if (code < 0) {
        free_job(job);
        call_fail(call, &fault);
        return;
    }
    engine_push(methods->engine, &job->change);
}

void item_file(struct call *call, const json_t *params)
{
    start(call, params, CHANGE_FILE);
}

void item_withdraw(struct call *call, const json_t *params)
{
    start(call, params, CHANGE_WITHDRAW);
}

/* --- answers ------------------------------------------------------------------------------------
 */

static int refusal_fault(const struct change_job *job, struct fault *fault)
{
    const struct item_refusal *refusal = &job->change.refusal;
    bool is_declined = refusal->list == REFUSED_DECLINED;
    const struct params_names *names = is_declined ? &job->declined : &job->tags;
    struct store_text name = names->names[refusal->at];
    char pointer[FAULT_FIELD_BYTES];
    pointer_to_element(pointer, sizeof pointer, is_declined ? "/declined" : "/tags",
                       names->given_at[refusal->at]);
    return fault_set(fault, is_declined && !refusal->retired ? FAULT_NOT_FOUND : FAULT_VOCABULARY,
                     pointer,
                     refusal->retired ? "The tag '%.*s' is retired and can be given no more."
                                      : "There is no tag '%.*s' in the vocabulary.",
                     (int)name.size, name.data);
}

static int fault_of_change(const struct change_job *job, struct fault *fault)
{
    const struct change *change = &job->change;
    switch (change->code) {
    case STORE_OK:
        return 0;
    case STORE_REFUSED:
        if (change->has_too_many_words) {
            return fault_set(fault, FAULT_LIMIT, change->filing.text.size > 0 ? "/text" : "/title",
                             "An item holds at most words_limit different words, which is %zu: "
                             "file it in parts.",
                             change->words_limit);
        }
        return refusal_fault(job, fault);
    case STORE_NOT_FOUND:
        return fault_set(fault, FAULT_NOT_FOUND, "/id", "There is no item '%.*s'.",
                         (int)change->filing.id.size, change->filing.id.data);
    default:
        return fault_of_store(fault, &change->error);
    }
}

static void end_change(struct change_job *job)
{
    static const char *const WAS[] = {
        [ITEM_NEW] = "new", [ITEM_REVISED] = "revised", [ITEM_SAME] = "same"};
    struct call *call = job->call;
    struct fault fault = {0};
    int code = fault_of_change(job, &fault);
    json_int_t seq = (json_int_t)job->change.filed.seq;
    bool is_filing = job->change.kind == CHANGE_FILE;
    const char *was = is_filing ? WAS[job->change.filed.was] : NULL;
    free_job(job);
    if (code < 0) {
        call_fail(call, &fault);
    } else if (is_filing) {
        call_answer_take(call, json_pack("{s:I, s:s}", "seq", seq, "was", was));
    } else {
        call_answer_take(call, json_pack("{s:I}", "seq", seq));
    }
}

void item_changes_done(struct change *done)
{
    while (done) {
        struct change *next = done->next;
        end_change((struct change_job *)done);
        done = next;
    }
}
