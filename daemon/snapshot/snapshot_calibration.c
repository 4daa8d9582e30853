#include "daemon/snapshot/snapshot_calibration.h"

#include <math.h>

#include "daemon/answer.h"
#include "daemon/learner/candidates.h"
#include "daemon/learner/model_chances.h"

enum {
    FORMAT = 1
};

static const char *const STEPS[] = {
    "score = base_score + bias + the sum of weight * x over the item's known terms.",
    "A tag with count 0 (tags.jsonl) is on no item: it has no chance. N is documents.",
    "belongs: the curve of the tag's group, the first one with its propensity p below "
    "propensity_below: at_floor at a score of floor_score or less; above it a straight line "
    "between the points (scores[i], chances[i]), level before the first and behind the last.",
    "Where none of the item's known terms has a weight for any tag, belongs = min(unprompted / "
    "documents / p, 1) whatever the score; 0 without documents.",
    "Of a draft without tags, a tag's chance is belongs.",
    "Of a draft with tags and of a filed item it is the chance to be missing, P(missing | not "
    "given), of the tags that it has not. p' = p_allowed (tags.jsonl): p, or where that is more "
    "least_propensities.least[c], c = floor(log2(N / unprompted)) within 0 and the last one, "
    "which is that of unprompted = 0, too.",
    "missing = (1 - p') * belongs / (1 - p' * belongs); 0 where p' * belongs is 1.",
    "promise: the candidates are the item's tags with a score above floor_score, those it has "
    "included, by bands of their count: of each band the candidates_a_band with the best scores, "
    "of equal ones the earlier row. It is the sum of missing over those of them that the item has "
    "not and whose belongs is at least agreement.belongs_from, belongs being that of the curve "
    "even where no term has a weight. Left out are those that somebody has said do not belong "
    "and, once the item was checked in full, those that were there at the check.",
    "others = promise, less the tag's own missing where its belongs is at least "
    "agreement.belongs_from.",
    "agreed: in each row of agreement.rows missing is looked up: a straight line in ln(m / (1 - "
    "m)) between the points (agreement.missing[i], chances[i]); below the first point in "
    "proportion to missing, level behind the last. Between rows a straight line in others, by the "
    "rows' promise, level outside.",
    "The chance is missing below agreement.from, agreed from 2 * agreement.from on, and between "
    "the two (1 - t) * missing + t * agreed with t = missing / agreement.from - 1.",
    "A filed item is one of those that were learned from: what learning it has added to the "
    "scores of its gaps is taken out of them first. That is not in a snapshot; proposals.jsonl "
    "has the chances that come of it.",
};

static json_t *steps_json(void)
{
    json_t *steps = json_array();
    for (size_t i = 0; i < sizeof STEPS / sizeof STEPS[0]; i++) {
        answer_append(&steps, json_string(STEPS[i]));
    }
    return steps;
}

/* --- P(belongs) ---------------------------------------------------------------------------------
 */

static json_t *scores_json(void)
{
    json_t *scores = json_array();
    for (size_t bin = 1; bin < CALIBRATORS_BINS; bin++) {
        answer_append(&scores, json_real(calibrators_middle(bin)));
    }
    return scores;
}

static json_t *group_json(const struct calibrators_curves *curves, size_t group)
{
    const struct calibrators_curve *curve = &curves->groups[group];
    json_t *chances = json_array();
    for (size_t bin = 1; bin < CALIBRATORS_BINS; bin++) {
        answer_append(&chances, json_real(curve->chance[bin]));
    }
    json_t *below =
        group < CALIBRATORS_GROUPS - 1 ? json_real(calibrators_cut(group)) : json_null();
    return json_pack("{s:o, s:f, s:f, s:o}", "propensity_below", below, "given", curve->given,
                     "at_floor", curve->chance[0], "chances", chances);
}

static json_t *groups_json(const struct calibrators_curves *curves)
{
    json_t *groups = json_array();
    for (size_t group = 0; group < CALIBRATORS_GROUPS; group++) {
        answer_append(&groups, group_json(curves, group));
    }
    return groups;
}

static json_t *belongs_json(const struct calibrators_curves *curves)
{
    return json_pack("{s:s, s:o, s:o}", "means",
                     "P(belongs) by score, a curve for each group of propensities; given: given "
                     "pairs above the floor behind the curve; propensity_below null: all others.",
                     "scores", scores_json(), "groups", groups_json(curves));
}

/* --- P(missing | not given) ---------------------------------------------------------------------
 */

static json_t *least_json(const struct model *model)
{
    json_t *least = json_array();
    for (size_t class = 0; class < CALIBRATORS_CLASSES; class ++) {
        answer_append(&least, json_real(model_least_of_class(model, class)));
    }
    return json_pack(
        "{s:s, s:o}", "means",
        "The least propensity that the evidence allows, by octave of N / unprompted; 0: "
        "any.",
        "least", least);
}

static json_t *bands_json(void)
{
    json_t *bands = json_array();
    for (enum standing_band band = STANDING_HEAD; band < STANDING_BANDS; band++) {
        answer_append(&bands, json_pack("{s:s, s:f}", "name", standing_band_name(band),
                                        "count_from", standing_band_from(band)));
    }
    return bands;
}

static json_t *row_json(const struct agreement *agreement, size_t row)
{
    json_t *chances = json_array();
    for (size_t cell = 0; cell < AGREEMENT_CHANCES; cell++) {
        answer_append(&chances, json_real(agreement->rows[row].chance[cell]));
    }
    return json_pack("{s:f, s:o}", "promise", agreement_row_middle(row), "chances", chances);
}

static json_t *agreement_json(const struct agreement *agreement)
{
    json_t *missing = json_array();
    json_t *rows = json_array();
    for (size_t cell = 0; cell < AGREEMENT_CHANCES; cell++) {
        answer_append(&missing, json_real(agreement_cell_middle(cell)));
    }
    for (size_t row = 0; row < AGREEMENT_PROMISES; row++) {
        answer_append(&rows, row_json(agreement, row));
    }
    return json_pack(
        "{s:s, s:f, s:f, s:o, s:o}", "means",
        "What a chance to be missing comes to in view of the item's other tags: by how "
        "many of these are expected to be missing (promise), and by the chance.",
        "from", MODEL_AGREED_FROM, "belongs_from", AGREEMENT_LEAST, "missing", missing, "rows",
        rows);
}

json_t *snapshot_calibration_json(const struct model *model)
{
    const struct calibrators_curves *curves = model_curves(model);
    struct model_size size;
    model_measure(model, &size);
    json_t *whole = json_object();
    answer_add(&whole, "format", json_integer(FORMAT));
    answer_add(&whole, "means",
               json_string("How scores become chances, step by step. Chances and propensities are "
                           "shares of 1; promise is a number of tags."));
    answer_add(&whole, "steps", steps_json());
    answer_add(&whole, "documents", answer_count(size.documents));
    answer_add(&whole, "early", json_boolean(calibrators_early(curves)));
    answer_add(&whole, "base_score", json_real(WEIGHTS_BASE_SCORE));
    answer_add(&whole, "floor_score", json_real(CALIBRATORS_FLOOR_SCORE));
    answer_add(&whole, "belongs", belongs_json(curves));
    answer_add(&whole, "least_propensities", least_json(model));
    answer_add(&whole, "candidates_a_band", json_integer(CANDIDATES_MOST));
    answer_add(&whole, "bands", bands_json());
    answer_add(&whole, "agreement", agreement_json(model_agreement(model)));
    return whole;
}
