#include "daemon/standing_json.h"

#include "daemon/answer.h"

void standing_tell(const struct standing *standing, uint64_t window, struct standing_told *ret_told)
{
    standing_ask(standing, window, &ret_told->answer);
    ret_told->history_count = standing_history(standing, ret_told->history);
    standing_reliability(standing, ret_told->reliability);
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

static json_t *history_json(const struct standing_told *told)
{
    json_t *history = json_array();
    for (size_t i = 0; i < told->history_count; i++) {
        const struct standing_point *point = &told->history[i];
        bool has_shadow = point->without[RANKING_P1] == point->without[RANKING_P1];
        json_t *entry = json_object();
        answer_add(&entry, "items", answer_count(point->items));
        answer_add(&entry, "with", values_json(point->with));
        answer_add(&entry, "without", has_shadow ? values_json(point->without) : json_null());
        answer_append(&history, entry);
    }
    return history;
}

static json_t *reliability_json(const struct standing_told *told)
{
    json_t *rows = json_array();
    for (size_t i = 0; i < RELIABILITY_CLASSES; i++) {
        const struct reliability_row *row = &told->reliability[i];
        answer_append(&rows, json_pack("{s:f, s:f, s:o, s:o, s:o}", "from", row->from, "to",
                                       row->to, "shown", answer_count(row->shown), "mean_chance",
                                       answer_number(row->mean_chance), "confirmed",
                                       answer_count(row->confirmed)));
    }
    return rows;
}

/* --- all of it ----------------------------------------------------------------------------------
 */

json_t *standing_json(const struct standing_told *told, uint64_t learned)
{
    json_t *result = json_object();
    answer_add(&result, "items", answer_count(told->answer.items));
    answer_add(&result, "bands", bands_json(&told->answer));
    answer_add(&result, "reliability", reliability_json(told));
    answer_add(&result, "history", history_json(told));
    answer_add(&result, "learned", answer_count(learned));
    return result;
}
