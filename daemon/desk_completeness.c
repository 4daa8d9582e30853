/*
 * desk.completeness: which share of the pairs that belong is on record.
 */
#include <math.h>
#include <stdlib.h>

#include "daemon/answer.h"
#include "daemon/learner/beta.h"
#include "daemon/learner/capture.h"
#include "daemon/outlook.h"
#include "daemon/params.h"
#include "daemon/read_job.h"
#include "daemon/tag_json.h"

enum {
    MOST = 1000
};

/* A tag by how many items lack it. */
struct loser {
    double missing;
    uint32_t number;
};

struct completeness_job {
    struct read_job job; /* first */
    struct store_text tag;
    uint64_t most;

    struct outlook outlook;
    struct completeness_sum bands[STANDING_BANDS]; /* STANDING_ALL: all tags */
    struct loser *losers;                          /* those that lose most, by falling number */
    size_t loser_count;
};

static void release(struct read_job *base)
{
    free(((struct completeness_job *)base)->losers);
}

/* --- sums over the vocabulary -------------------------------------------------------------------
 */

static void insert_loser(struct completeness_job *job, double missing, uint32_t number)
{
    size_t at = job->loser_count;
    if (at == job->most) {
        if (job->losers[at - 1].missing >= missing) {
            return;
        }
        at--;
    } else {
        job->loser_count++;
    }
    while (at > 0 && job->losers[at - 1].missing < missing) {
        job->losers[at] = job->losers[at - 1];
        at--;
    }
    job->losers[at] = (struct loser){.missing = missing, .number = number};
}

static int add_tag(void *user, const struct vocabulary_tag *tag)
{
    struct completeness_job *job = user;
    const struct outlook *outlook = &job->outlook;
    struct completeness_tag counts = outlook_of_tag(&tag->counts);
    enum standing_band band = standing_band_of(counts.count);
    completeness_sum_add(&job->bands[STANDING_ALL], &outlook->fit, &counts, outlook->growth);
    completeness_sum_add(&job->bands[band], &outlook->fit, &counts, outlook->growth);
    double missing = completeness_missing_at(&outlook->fit, &counts, outlook->growth);
    if (job->tag.size == 0 && missing > 0.0) {
        insert_loser(job, missing, tag->number);
    }
    return STORE_OK;
}

/* --- the answer ---------------------------------------------------------------------------------
 */

/* Adds share, low, high, given, missing and from to an object. */
static void add_completeness(json_t **object, const struct completeness *of)
{
    bool is_known = of->given > 0.0 || of->missing > 0.0;
    answer_add(object, "share", answer_number(is_known ? of->share : NAN));
    answer_add(object, "low", answer_number(is_known ? of->low : NAN));
    answer_add(object, "high", answer_number(is_known ? of->high : NAN));
    answer_add(object, "given", answer_count((uint64_t)llround(of->given)));
    answer_add(object, "missing", answer_number(of->missing));
    answer_add(object, "from", json_string(outlook_from(of->from)));
}

static json_t *sum_json(const struct completeness_job *job, enum standing_band band)
{
    struct completeness of = completeness_of_sum(&job->bands[band], &job->outlook.fit);
    json_t *object = json_object();
    add_completeness(&object, &of);
    return object;
}

static json_t *tag_share_json(const struct completeness_job *job, const struct vocabulary_tag *tag)
{
    struct completeness_tag counts = outlook_of_tag(&tag->counts);
    struct completeness of =
        completeness_of_tag(&job->outlook.fit, &counts, job->outlook.documents);
    json_t *object = json_object();
    answer_add(&object, "tag", json_string(tag->name));
    add_completeness(&object, &of);
    return object;
}

static int add_losers(struct completeness_job *job, struct store_view *view, json_t **tags)
{
    struct store_error error = {0};
    struct vocabulary_tag tag;
    for (size_t i = 0; i < job->loser_count; i++) {
        if (vocabulary_get(view, job->losers[i].number, &tag, &error) != STORE_OK) {
            return read_job_fail(&job->job, &error);
        }
        answer_append(tags, tag_share_json(job, &tag));
    }
    return 0;
}

/* The tag that was asked about, or those that lose most. */
static int add_tags(struct completeness_job *job, struct store_view *view, json_t **tags)
{
    struct store_error error = {0};
    struct vocabulary_tag tag;
    if (job->tag.size == 0) {
        return add_losers(job, view, tags);
    }
    int code = vocabulary_find(view, job->tag.data, job->tag.size, &tag, &error);
    if (code == STORE_NOT_FOUND) {
        return fault_set(&job->job.fault, FAULT_NOT_FOUND, "/tag", "There is no tag '%.*s'.",
                         (int)job->tag.size, job->tag.data);
    }
    if (code != STORE_OK) {
        return read_job_fail(&job->job, &error);
    }
    answer_append(tags, tag_share_json(job, &tag));
    return 0;
}

/* How often a tag that was on an item was taken off by a check at random. */
static json_t *wrong_json(const struct store_evidence *evidence)
{
    double seen = (double)evidence->seen;
    double wrong = (double)evidence->wrong;
    struct interval interval = proportion_interval(wrong, seen);
    bool is_known = evidence->seen > 0;
    return json_pack("{s:o, s:o, s:o, s:o, s:o}", "share",
                     answer_number(is_known ? wrong / seen : NAN), "low",
                     answer_number(is_known ? interval.low : NAN), "high",
                     answer_number(is_known ? interval.high : NAN), "wrong",
                     answer_count(evidence->wrong), "seen", answer_count(evidence->seen));
}

static json_t *second_json(const struct store_evidence *evidence)
{
    if (evidence->second_items == 0) {
        return json_null();
    }
    const struct capture_counts counts = {.first = (double)evidence->second_first,
                                          .second = (double)evidence->second_second,
                                          .both = (double)evidence->second_both};
    struct capture_estimate total = capture_total(&counts);
    struct capture_share found = capture_completeness(&counts);
    json_t *second = json_object();
    answer_add(&second, "items", answer_count(evidence->second_items));
    answer_add(&second, "first", answer_count(evidence->second_first));
    answer_add(&second, "second", answer_count(evidence->second_second));
    answer_add(&second, "both", answer_count(evidence->second_both));
    answer_add(&second, "chapman",
               json_pack("{s:o, s:o, s:o}", "true", answer_number(total.total), "low",
                         answer_number(total.low), "high", answer_number(total.high)));
    answer_add(&second, "found_share", answer_number(found.share));
    answer_add(&second, "rolling", answer_number(capture_consistency_rolling(&counts)));
    answer_add(&second, "hooper", answer_number(capture_consistency_hooper(&counts)));
    return second;
}

static json_t *result_json(struct completeness_job *job, struct store_view *view)
{
    const struct store_evidence evidence = store_view_totals(view).evidence;
    json_t *tags = json_array();
    if (add_tags(job, view, &tags) < 0) {
        json_decref(tags);
        return NULL;
    }
    json_t *bands = json_object();
    for (enum standing_band band = STANDING_HEAD; band < STANDING_BANDS; band++) {
        answer_add(&bands, standing_band_name(band), sum_json(job, band));
    }
    json_t *result = json_object();
    answer_add(&result, "overall", sum_json(job, STANDING_ALL));
    answer_add(&result, "bands", bands);
    answer_add(&result, "tags", tags);
    answer_add(&result, "checks",
               json_pack("{s:o, s:o}", "random", answer_count(evidence.checks_random), "picked",
                         answer_count(evidence.checks_picked)));
    answer_add(&result, "wrong", wrong_json(&evidence));
    answer_add(&result, "second", second_json(&evidence));
    answer_add(&result, "curve", tag_curve_json(&job->outlook.fit));
    answer_add(&result, "learned", answer_count(job->outlook.learned));
    return result;
}

static void run(struct read_job *base)
{
    struct completeness_job *job = (struct completeness_job *)base;
    struct store_view *view = NULL;
    struct store_error error = {0};
    job->losers = calloc(job->most, sizeof *job->losers);
    if (!job->losers || read_job_view(base, &view) < 0) {
        return;
    }
    for (size_t band = 0; band < STANDING_BANDS; band++) {
        completeness_sum_init(&job->bands[band]);
    }
    if (outlook_begin(base->methods->engine, store_view_totals(view).items, &job->outlook) < 0) {
        store_end(view);
        return; /* no result: no memory */
    }
    if (vocabulary_by_number(view, add_tag, job, &error) != STORE_OK) {
        (void)read_job_fail(base, &error); /* told at the end */
    } else {
        base->result = result_json(job, view);
    }
    store_end(view);
}

static int read_request(struct completeness_job *job, const json_t *params, struct fault *fault)
{
    static const char *const MEMBERS[] = {"tag", "most", NULL};
    job->most = 20;
    if (params_known(params, MEMBERS, fault) < 0 ||
        params_optional_name(params, "tag", &job->tag, fault) < 0 ||
        params_whole(params, "most", 1, MOST, &job->most, fault) < 0) {
        return fault->code;
    }
    return 0;
}

void desk_completeness(struct call *call, const json_t *params)
{
    struct completeness_job *job = read_job_new(call, params, sizeof *job);
    if (!job) {
        return;
    }
    job->job.run = run;
    job->job.release = release;
    read_job_start(&job->job, read_request(job, params, &job->job.fault));
}
