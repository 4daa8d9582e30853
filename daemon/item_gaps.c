/*
 * item.gaps: the tags that a filed item, or a draft, most probably lacks.
 */
#include <assert.h>
#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/item_read.h"
#include "daemon/json_text.h"
#include "daemon/params.h"
#include "daemon/read_job.h"
#include "storage/vocabulary.h"

struct gaps_job {
    struct read_job job;  /* first */
    struct store_text id; /* empty for a draft */
    struct store_text title;
    struct store_text text;
    struct store_text language;
    struct params_names tags;
    const json_t *fields;
    uint64_t most;
    double floor;
    bool why;
    size_t words_limit;

    struct workspace *workspace;
    uint32_t *draft_tags;
};

static void release(struct read_job *base)
{
    struct gaps_job *job = (struct gaps_job *)base;
    params_names_deinit(&job->tags);
    free(job->draft_tags);
    if (job->workspace) {
        workspaces_return(engine_workspaces(job->job.methods->engine), job->workspace);
    }
}

static int no_memory(struct fault *fault)
{
    return fault_set(fault, FAULT_INTERNAL, NULL, "There is no memory for the answer.");
}

/* --- what is asked about ------------------------------------------------------------------------
 */

/* The numbers of a draft's tags; unknown ones are passed over. */
static int look_up_tags(struct gaps_job *job, struct store_view *view, size_t *ret_count)
{
    struct vocabulary_tag tag;
    size_t count = 0;
    job->draft_tags = calloc(job->tags.count + 1, sizeof *job->draft_tags);
    if (!job->draft_tags) {
        return no_memory(&job->job.fault);
    }
    for (size_t i = 0; i < job->tags.count; i++) {
        struct store_error error = {0};
        int code =
            vocabulary_find(view, job->tags.names[i].data, job->tags.names[i].size, &tag, &error);
        if (code == STORE_OK) {
            job->draft_tags[count++] = tag.number;
        } else if (code != STORE_NOT_FOUND) {
            return read_job_fail(&job->job, &error);
        }
    }
    *ret_count = count;
    return 0;
}

static int prepare_draft(struct gaps_job *job, struct store_view *view,
                         struct features_source *ret_source, struct model_question *question)
{
    struct workspace *workspace = job->workspace;
    char *language = workspace->source.language;
    memcpy(language, job->language.data, job->language.size);
    language[job->language.size] = '\0';
    workspace->fields.count = 0;
    if (job->fields && field_list_fill(&workspace->fields, job->fields) < 0) {
        return no_memory(&job->job.fault);
    }
    if (look_up_tags(job, view, &question->given_count) < 0) {
        return job->job.fault.code;
    }
    question->given = job->draft_tags;
    question->tagged = job->tags.count > 0;
    *ret_source = (struct features_source){.title = job->title.data,
                                           .title_bytes = job->title.size,
                                           .text = job->text.data,
                                           .text_bytes = job->text.size,
                                           .language = job->language.size > 0 ? language : NULL,
                                           .fields = workspace->fields.entries,
                                           .field_count = workspace->fields.count};
    return 0;
}

static int prepare_item(struct gaps_job *job, struct store_view *view,
                        struct features_source *ret_source, struct model_question *question)
{
    struct workspace *workspace = job->workspace;
    if (read_item(&job->job, view, job->id, workspace) < 0) {
        return job->job.fault.code;
    }
    int code = item_source_fill(&workspace->source, &workspace->record);
    if (code < 0) {
        return no_memory(&job->job.fault);
    }
    *ret_source = workspace->source.source;
    question->given = workspace->record.tags.list;
    question->given_count = workspace->record.tags.count;
    question->excluded = workspace->record.known_not.list;
    question->excluded_count = workspace->record.known_not.count;
    question->checked_below =
        workspace->record.check.is_there ? workspace->record.check.vocabulary : 0;
    question->number = workspace->record.seq;
    question->tagged = true;
    return 0;
}

/* What is filed was within the limit of its time; a draft must be within that of today. */
static int take_out_words(struct gaps_job *job, const struct features_source *source,
                          struct model_question *question)
{
    struct features *features = job->workspace->features;
    int code = features_extract(features, source, job->id.size > 0 ? SIZE_MAX : job->words_limit);
    if (code == -E2BIG) {
        return fault_set(&job->job.fault, FAULT_LIMIT, item_source_longest(source),
                         "A draft holds at most words_limit different words, which is %zu.",
                         job->words_limit);
    }
    if (code < 0) {
        return no_memory(&job->job.fault);
    }
    question->features = features_list(features);
    question->feature_count = features_count(features);
    return 0;
}

static int prepare(struct gaps_job *job, struct model_question *question)
{
    struct store_view *view = NULL; /* a draft without tags needs none */
    struct features_source source = {0};
    bool is_stored = job->id.size > 0 || job->tags.count > 0;
    if (is_stored && read_job_view(&job->job, &view) < 0) {
        return job->job.fault.code;
    }
    int code = job->id.size > 0 ? prepare_item(job, view, &source, question)
                                : prepare_draft(job, view, &source, question);
    store_end(view);
    return code < 0 ? code : take_out_words(job, &source, question);
}

/* --- the answer ---------------------------------------------------------------------------------
 */

static void write_words(struct json_text *text, const struct model_question *question,
                        const struct model_gap *gap)
{
    assert(gap->word_count == 0 || question->features); /* words are features of the question */
    json_text_plain(text, ",\"words\":[");
    for (size_t i = 0; i < gap->word_count; i++) {
        const struct feature *feature = &question->features[gap->words[i].feature];
        json_text_plain(text, i > 0 ? ",[" : "[");
        json_text_string(text, feature->surface, feature->surface_bytes);
        json_text_plain(text, ",");
        json_text_real(text, gap->words[i].share);
        json_text_plain(text, "]");
    }
    json_text_plain(text, "]");
}

static void write_gap(struct json_text *text, const char *name,
                      const struct model_question *question, const struct model_gap *gap)
{
    json_text_plain(text, "{\"tag\":");
    json_text_string(text, name, strlen(name));
    json_text_plain(text, ",\"chance\":");
    json_text_real(text, gap->chance);
    json_text_plain(text, ",\"score\":");
    json_text_real(text, gap->score);
    if (question->why) {
        write_words(text, question, gap);
    }
    json_text_plain(text, "}");
}

/* The model may know tags that were opened after the question's view: names need a new one. */
static int write_gaps(struct gaps_job *job, const struct model_question *question,
                      const struct model_answer *answer, struct json_text *text)
{
    struct store_view *view = NULL;
    struct store_error error = {0};
    struct vocabulary_tag tag;
    if (read_job_view(&job->job, &view) < 0) {
        return job->job.fault.code;
    }
    int code = 0;
    for (size_t i = 0; i < answer->gap_count && code == 0; i++) {
        if (vocabulary_get(view, answer->gaps[i].tag, &tag, &error) != STORE_OK) {
            code = read_job_fail(&job->job, &error);
        } else {
            json_text_plain(text, i > 0 ? "," : "");
            write_gap(text, tag.name, question, &answer->gaps[i]);
        }
    }
    store_end(view);
    return code;
}

static void write_answer(struct gaps_job *job, const struct model_question *question,
                         const struct model_answer *answer, uint64_t learned)
{
    struct json_text text = {0};
    json_text_plain(&text, "{\"gaps\":[");
    int code = write_gaps(job, question, answer, &text);
    json_text_plain(&text, "],\"expected\":");
    json_text_real(&text, answer->expected);
    json_text_plain(&text, ",\"learned\":");
    json_text_whole(&text, learned);
    json_text_plain(&text, answer->early ? ",\"early\":true}" : ",\"early\":false}");
    char *written = json_text_take(&text);
    if (code < 0) {
        free(written); /* half an answer; the job holds the fault */
    } else {
        job->job.written = written; /* NULL: no memory */
    }
}

/* Gives back what an earlier try has used. */
static int borrow_workspace(struct gaps_job *job)
{
    struct workspaces *workspaces = engine_workspaces(job->job.methods->engine);
    if (job->workspace) {
        workspaces_return(workspaces, job->workspace);
    }
    free(job->draft_tags);
    job->draft_tags = NULL;
    job->workspace = workspaces_borrow(workspaces);
    return job->workspace ? 0 : no_memory(&job->job.fault);
}

/* Asks the model, and again where another one has taken its place in between. False: the job has a
 * fault. */
static bool ask_model(struct gaps_job *job, struct model_question *question,
                      struct model_answer *ret_answer, uint64_t *ret_learned)
{
    int code = -ESTALE;
    while (code == -ESTALE) {
        *question = (struct model_question){
            .most = (size_t)job->most, .floor = job->floor, .why = job->why};
        if (borrow_workspace(job) < 0 || prepare(job, question) < 0) {
            return false;
        }
        code =
            engine_ask(job->job.methods->engine, question, job->workspace, ret_answer, ret_learned);
    }
    if (code == -EIO) {
        (void)read_job_fail_model(&job->job);
    } else if (code < 0) {
        (void)no_memory(&job->job.fault);
    }
    return code == 0;
}

static void run(struct read_job *base)
{
    struct gaps_job *job = (struct gaps_job *)base;
    struct model_question question;
    struct model_answer answer;
    uint64_t learned = 0;
    if (!ask_model(job, &question, &answer, &learned)) {
        return;
    }
    write_answer(job, &question, &answer, learned);
}

/* --- the request --------------------------------------------------------------------------------
 */

static int read_draft(struct gaps_job *job, const json_t *params, const struct options *options,
                      struct fault *fault)
{
    size_t text_limit = options->text_limit_bytes;
    job->fields = json_object_get(params, "fields");
    if (job->fields && fields_check(job->fields, "/fields", fault) < 0) {
        return fault->code;
    }
    if (params_text(params, "title", text_limit, "text_limit", &job->title, fault) < 0 ||
        params_text(params, "text", text_limit, "text_limit", &job->text, fault) < 0 ||
        params_names(params, "tags", &job->tags, fault) < 0) {
        return fault->code;
    }
    if (job->tags.count > options->tags_limit) {
        return fault_set(fault, FAULT_LIMIT, "/tags",
                         "A draft has at most tags_limit tags, which is %zu.",
                         (size_t)options->tags_limit);
    }
    return params_language(params, "language", &job->language, fault);
}

static int check_id_alone(const json_t *params, struct fault *fault)
{
    static const char *const DRAFT[] = {"title", "text", "fields", "tags", "language", NULL};
    for (size_t i = 0; DRAFT[i]; i++) {
        if (params_has(params, DRAFT[i])) {
            return fault_set(fault, FAULT_PARAMS, "/id",
                             "Give id, or a draft, not both: %s stands beside id.", DRAFT[i]);
        }
    }
    return 0;
}

static int read_request(struct gaps_job *job, const json_t *params, const struct options *options,
                        struct fault *fault)
{
    static const char *const MEMBERS[] = {"id",       "title", "text",  "fields", "tags",
                                          "language", "most",  "floor", "why",    NULL};
    job->most = 10;
    job->floor = 0.05;
    job->words_limit = options->words_limit;
    if (params_known(params, MEMBERS, fault) < 0 ||
        params_whole(params, "most", 0, MODEL_MOST_GAPS, &job->most, fault) < 0 ||
        params_share(params, "floor", &job->floor, fault) < 0 ||
        params_flag(params, "why", &job->why, fault) < 0) {
        return fault->code;
    }
    if (!params_has(params, "id")) {
        return read_draft(job, params, options, fault);
    }
    int code = check_id_alone(params, fault);
    return code < 0 ? code : params_name(params, "id", &job->id, fault);
}

void item_gaps(struct call *call, const json_t *params)
{
    struct gaps_job *job = read_job_new(call, params, sizeof *job);
    if (!job) {
        return;
    }
    job->job.run = run;
    job->job.release = release;
    read_job_start(&job->job,
                   read_request(job, params, job->job.methods->options, &job->job.fault));
}
