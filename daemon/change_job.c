#include "daemon/change_job.h"

#include <stdlib.h>
#include <string.h>

#include "daemon/clock.h"
#include "daemon/item_source.h"
#include "daemon/pointer.h"
#include "daemon/read_job.h"

static void free_job(struct change_job *job)
{
    params_names_deinit(&job->tags);
    params_names_deinit(&job->prompted);
    params_names_deinit(&job->declined);
    field_list_deinit(&job->field_list);
    free(job->fields);
    free(job->change.checked.missed);
    free(job->change.checked.extra);
    free(job);
}

/* --- on its way ---------------------------------------------------------------------------------
 */

struct change_job *change_job_new(struct call *call, enum change_kind kind)
{
    struct methods *methods = call_context(call);
    struct change_job *job = calloc(1, sizeof *job);
    if (!job) {
        struct fault fault = {0};
        (void)fault_set(&fault, FAULT_INTERNAL, NULL, "There is no memory for the request.");
        call_fail(call, &fault);
        return NULL;
    }
    job->call = call;
    job->options = methods->options;
    job->tags_member = "tags";
    job->declined_member = "declined";
    job->change.kind = kind;
    job->change.filing.stored_at_ms = clock_wall_ms();
    job->change.filing.uid = call_uid(call);
    return job;
}

void change_job_start_take(struct change_job *job, int code, const struct fault *fault)
{
    struct call *call = job->call;
    struct methods *methods = call_context(call);
    if (code < 0) {
        free_job(job);
        call_fail(call, fault);
        return;
    }
    engine_push(methods->engine, &job->change);
}

void change_job_use_names(struct change_job *job)
{
    struct item_filing *filing = &job->change.filing;
    filing->tags = job->tags.names;
    filing->tag_count = job->tags.count;
    filing->prompted = job->prompted.names;
    filing->prompted_count = job->prompted.count;
    filing->declined = job->declined.names;
    filing->declined_count = job->declined.count;
}

int change_job_name_fault(struct fault *fault, const char *list, size_t at, const char *sentence)
{
    char base[FAULT_FIELD_BYTES];
    char pointer[FAULT_FIELD_BYTES];
    pointer_to_member(base, sizeof base, "", list);
    pointer_to_element(pointer, sizeof pointer, base, at);
    return fault_set(fault, FAULT_PARAMS, pointer, "%s", sentence);
}

/* --- what became of it --------------------------------------------------------------------------
 */

static int refusal_fault(const struct change_job *job, struct fault *fault)
{
    const struct change *change = &job->change;
    const struct item_refusal *refusal = &change->refusal;
    if (refusal->list == REFUSED_TAGGER) {
        return fault_set(fault, FAULT_PARAMS, "/tagger",
                         "'%.*s' has filed the item: an independent tagging comes from another "
                         "tagger.",
                         (int)change->filing.tagger.size, change->filing.tagger.data);
    }
    bool is_second_list = refusal->list == REFUSED_DECLINED || refusal->list == REFUSED_NOT;
    const struct params_names *names = is_second_list ? &job->declined : &job->tags;
    const char *member = is_second_list ? job->declined_member : job->tags_member;
    struct store_text name = names->names[refusal->at];
    char base[FAULT_FIELD_BYTES];
    char pointer[FAULT_FIELD_BYTES];
    pointer_to_member(base, sizeof base, "", member);
    pointer_to_element(pointer, sizeof pointer, base, names->given_at[refusal->at]);
    bool may_be_opened = change->kind == CHANGE_FILE || change->kind == CHANGE_TAG_AGAIN;
    bool is_vocabulary = refusal->retired || (may_be_opened && refusal->list == REFUSED_TAG);
    return fault_set(fault, is_vocabulary ? FAULT_VOCABULARY : FAULT_NOT_FOUND, pointer,
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
            return fault_set(fault, FAULT_LIMIT, item_source_longest(change->counted),
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

static json_t *names_json(const struct vocabulary_tag *tags, size_t count)
{
    json_t *names = json_array();
    int code = 0;
    for (size_t i = 0; i < count; i++) {
        code |= json_array_append_new(names, json_string(tags[i].name));
    }
    if (code < 0) {
        json_decref(names);
        return NULL;
    }
    return names;
}

static json_t *answer_json(const struct change *change)
{
    static const char *const WAS[] = {
        [ITEM_NEW] = "new", [ITEM_REVISED] = "revised", [ITEM_SAME] = "same"};
    json_int_t seq = (json_int_t)change->filed.seq;
    switch (change->kind) {
    case CHANGE_FILE:
    case CHANGE_TAG_AGAIN:
        return json_pack("{s:I, s:s}", "seq", seq, "was", WAS[change->filed.was]);
    case CHANGE_CHECK:
        return json_pack("{s:I, s:o, s:o}", "seq", seq, "missed",
                         names_json(change->checked.missed, change->checked.missed_count), "extra",
                         names_json(change->checked.extra, change->checked.extra_count));
    default:
        return json_pack("{s:I}", "seq", seq);
    }
}

static void end_change(struct change_job *job)
{
    struct call *call = job->call;
    struct fault fault = {0};
    int code = fault_of_change(job, &fault);
    json_t *answer = code < 0 ? NULL : answer_json(&job->change);
    free_job(job);
    if (code < 0) {
        call_fail(call, &fault);
    } else if (answer) {
        call_answer_take(call, answer);
    } else {
        /* It is made, and an error would say that it is not: no answer, and the connection ends. */
        call_answer_text_take(call, NULL);
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
