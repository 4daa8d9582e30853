/*
 * desk.standing: how good the proposals are, each item scored before it was learned.
 */
#include "daemon/answer.h"
#include "daemon/params.h"
#include "daemon/read_job.h"

enum {
    WINDOW = 10000
};

struct standing_job {
    struct read_job job; /* first */
    uint64_t window;
    uint64_t learned;
    struct standing_answer answer;
    struct standing_point history[STANDING_SEGMENTS];
    size_t history_count;
    struct reliability_row reliability[RELIABILITY_CLASSES];
};

static void read_standing(void *user, const struct model *model, const struct base *base,
                          uint64_t learned)
{
    (void)base;
    struct standing_job *job = user;
    const struct standing *standing = model_standing(model);
    job->learned = learned;
    standing_ask(standing, job->window, &job->answer);
    job->history_count = standing_history(standing, job->history);
    standing_reliability(standing, job->reliability);
}

/* --- bands --------------------------------------------------------------------------------------
 */

static json_t *figures_json(const struct standing_figure figures[RANKING_FIGURES])
{
    json_t *object = json_object();
    for (enum ranking_figure f = 0; f < RANKING_FIGURES; f++) {
        answer_add(&object, ranking_name(f),
                   json_pack("{s:o, s:o}", "value", answer_number(figures[f].value), "error",
                             answer_number(figures[f].error)));
    }
    return object;
}

static json_t *gains_json(const struct standing_gain gains[RANKING_FIGURES])
{
    json_t *object = json_object();
    for (enum ranking_figure f = 0; f < RANKING_FIGURES; f++) {
        const struct standing_gain *gain = &gains[f];
        answer_add(&object, ranking_name(f),
                   json_pack("{s:o, s:o, s:o, s:o, s:o, s:o}", "value", answer_number(gain->value),
                             "low", answer_number(gain->low), "high", answer_number(gain->high),
                             "wins", answer_count(gain->wins), "losses", answer_count(gain->losses),
                             "p", answer_number(gain->p)));
    }
    return object;
}

static json_t *bands_json(const struct standing_answer *answer)
{
    json_t *bands = json_object();
    for (enum standing_band band = STANDING_ALL; band < STANDING_BANDS; band++) {
        const struct standing_in_band *in_band = &answer->bands[band];
        bool is_paired = in_band->paired > 0;
        json_t *entry = json_object();
        answer_add(&entry, "items", answer_count(in_band->items));
        answer_add(&entry, "with", figures_json(in_band->with));
        answer_add(&entry, "without", is_paired ? figures_json(in_band->without) : json_null());
        answer_add(&entry, "gain", is_paired ? gains_json(in_band->gain) : json_null());
        answer_add(&bands, standing_band_name(band), entry);
    }
    return bands;
}

/* --- over time ----------------------------------------------------------------------------------
 */

/* NULL where nothing is known of any figure. */
static json_t *values_json(const double values[RANKING_FIGURES])
{
    json_t *object = json_object();
    for (enum ranking_figure f = 0; f < RANKING_FIGURES; f++) {
        answer_add(&object, ranking_name(f), answer_number(values[f]));
    }
    return object;
}

static json_t *history_json(const struct standing_job *job)
{
    json_t *history = json_array();
    for (size_t i = 0; i < job->history_count; i++) {
        const struct standing_point *point = &job->history[i];
        bool has_shadow = point->without[RANKING_P1] == point->without[RANKING_P1];
        json_t *entry = json_object();
        answer_add(&entry, "items", answer_count(point->items));
        answer_add(&entry, "with", values_json(point->with));
        answer_add(&entry, "without", has_shadow ? values_json(point->without) : json_null());
        answer_append(&history, entry);
    }
    return history;
}

static json_t *reliability_json(const struct standing_job *job)
{
    json_t *rows = json_array();
    for (size_t i = 0; i < RELIABILITY_CLASSES; i++) {
        const struct reliability_row *row = &job->reliability[i];
        answer_append(&rows, json_pack("{s:f, s:f, s:o, s:o, s:o}", "from", row->from, "to",
                                       row->to, "shown", answer_count(row->shown), "mean_chance",
                                       answer_number(row->mean_chance), "confirmed",
                                       answer_count(row->confirmed)));
    }
    return rows;
}

/* --- the request --------------------------------------------------------------------------------
 */

static void run(struct read_job *base)
{
    struct standing_job *job = (struct standing_job *)base;
    if (engine_read_model(base->methods->engine, read_standing, job) < 0) {
        return; /* no result: no memory */
    }
    json_t *result = json_object();
    answer_add(&result, "items", answer_count(job->answer.items));
    answer_add(&result, "bands", bands_json(&job->answer));
    answer_add(&result, "reliability", reliability_json(job));
    answer_add(&result, "history", history_json(job));
    answer_add(&result, "learned", answer_count(job->learned));
    base->result = result;
}

static int read_request(struct standing_job *job, const json_t *params, struct fault *fault)
{
    static const char *const MEMBERS[] = {"window", NULL};
    job->window = WINDOW;
    if (params_known(params, MEMBERS, fault) < 0 ||
        params_whole(params, "window", 0, INT64_MAX, &job->window, fault) < 0) {
        return fault->code;
    }
    return 0;
}

void desk_standing(struct call *call, const json_t *params)
{
    struct standing_job *job = read_job_new(call, params, sizeof *job);
    if (!job) {
        return;
    }
    job->job.run = run;
    read_job_start(&job->job, read_request(job, params, &job->job.fault));
}
