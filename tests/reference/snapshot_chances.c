#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/reference/snapshot_chances.h"

#include <math.h>
#include <stdlib.h>

/* A draft's tags, by row. */
struct tag_state {
    double on_curve;
    double belongs;
    bool is_given;
    bool is_candidate;
};

struct asked {
    const struct snapshot_files *files;
    const json_t *calibration;
    const json_t *agreement;
    double floor_score;
    const double *scores;
    struct tag_state *states;
    bool has_tags;
};

static double real_at(const json_t *array, size_t at)
{
    assert_true(at < json_array_size(array));
    return json_number_value(json_array_get(array, at));
}

/* --- straight lines -----------------------------------------------------------------------------
 */

/* Between two points: the first one, and the share of the other. */
struct place {
    size_t below;
    double share;
};

static double itself(double point)
{
    return point;
}

static double logit(double chance)
{
    return log(chance / (1.0 - chance));
}

/* Where `at` lies among `count` rising points on the scale; within the first and the last. */
static struct place place_of(const json_t *points, size_t count, double (*scale)(double), double at)
{
    if (at <= real_at(points, 0)) {
        return (struct place){0, 0.0};
    }
    if (at >= real_at(points, count - 1)) {
        return (struct place){count - 2, 1.0};
    }
    size_t below = 0;
    while (real_at(points, below + 1) < at) {
        below++;
    }
    double from = scale(real_at(points, below));
    return (struct place){below, (scale(at) - from) / (scale(real_at(points, below + 1)) - from)};
}

static double at_place(const json_t *values, const struct place *place)
{
    return (1.0 - place->share) * real_at(values, place->below) +
           place->share * real_at(values, place->below + 1);
}

/* --- P(belongs) ---------------------------------------------------------------------------------
 */

static const json_t *group_of(const json_t *groups, double p)
{
    size_t group = 0;
    while (group + 1 < json_array_size(groups) &&
           p >= snapshot_number(json_array_get(groups, group), "propensity_below")) {
        group++;
    }
    return json_array_get(groups, group);
}

static double on_curve(const struct asked *asked, size_t row)
{
    const json_t *curves = json_object_get(asked->calibration, "belongs");
    const json_t *points = json_object_get(curves, "scores");
    const json_t *group = group_of(json_object_get(curves, "groups"), asked->files->tags[row].p);
    if (asked->scores[row] <= asked->floor_score) {
        return snapshot_number(group, "at_floor");
    }
    struct place place = place_of(points, json_array_size(points), itself, asked->scores[row]);
    return at_place(json_object_get(group, "chances"), &place);
}

/* How often the tag belongs, whatever the draft. */
static double prevalence(const struct asked *asked, size_t row)
{
    const struct snapshot_tag *tag = &asked->files->tags[row];
    double documents = fmax(snapshot_number(asked->calibration, "documents"), 1.0);
    return fmin(tag->unprompted / documents / tag->p, 1.0);
}

/* --- P(missing) ---------------------------------------------------------------------------------
 */

static double missing(const struct asked *asked, size_t row, double q)
{
    double p = asked->files->tags[row].p_allowed;
    return p * q < 1.0 ? (1.0 - p) * q / (1.0 - p * q) : 0.0;
}

/* The best row of a band that is no candidate yet; tag_count where there is none. */
static size_t best_of_band(const struct asked *asked, double count_from, double count_below)
{
    size_t best = asked->files->tag_count;
    for (size_t row = 0; row < asked->files->tag_count; row++) {
        double count = asked->files->tags[row].count;
        bool is_open = asked->scores[row] > asked->floor_score &&
                       !asked->states[row].is_candidate && count > 0.0 && count >= count_from &&
                       count < count_below;
        if (is_open &&
            (best == asked->files->tag_count || asked->scores[row] > asked->scores[best])) {
            best = row;
        }
    }
    return best;
}

static void choose_candidates(const struct asked *asked)
{
    const json_t *bands = json_object_get(asked->calibration, "bands");
    double most = snapshot_number(asked->calibration, "candidates_a_band");
    double below = INFINITY;
    for (size_t band = 0; band < json_array_size(bands); band++) {
        double from = snapshot_number(json_array_get(bands, band), "count_from");
        size_t row = 0;
        for (int n = 0; n < most && row < asked->files->tag_count; n++) {
            row = best_of_band(asked, from, below);
            if (row < asked->files->tag_count) {
                asked->states[row].is_candidate = true;
            }
        }
        below = from;
    }
}

static bool is_likely(const struct asked *asked, double q)
{
    return q >= snapshot_number(asked->agreement, "belongs_from");
}

static double promise_of(const struct asked *asked)
{
    double promise = 0.0;
    for (size_t row = 0; row < asked->files->tag_count; row++) {
        const struct tag_state *state = &asked->states[row];
        bool takes_part =
            state->is_candidate && !state->is_given && is_likely(asked, state->on_curve);
        promise += takes_part ? missing(asked, row, state->on_curve) : 0.0;
    }
    return promise;
}

static double in_row(const struct asked *asked, size_t row, double chance)
{
    const json_t *points = json_object_get(asked->agreement, "missing");
    const json_t *rows = json_object_get(asked->agreement, "rows");
    struct place place = place_of(points, json_array_size(points), logit, chance);
    return at_place(json_object_get(json_array_get(rows, row), "chances"), &place) *
           fmin(chance / real_at(points, 0), 1.0);
}

/* Rows by their promise. */
static double agreed(const struct asked *asked, double others, double chance)
{
    const json_t *rows = json_object_get(asked->agreement, "rows");
    json_t *promises = json_array();
    for (size_t row = 0; row < json_array_size(rows); row++) {
        assert_int_equal(
            json_array_append(promises, json_object_get(json_array_get(rows, row), "promise")), 0);
    }
    struct place place = place_of(promises, json_array_size(rows), itself, others);
    json_decref(promises);
    return (1.0 - place.share) * in_row(asked, place.below, chance) +
           place.share * in_row(asked, place.below + 1, chance);
}

static double chance_missing(const struct asked *asked, size_t row, double promise)
{
    double belongs = asked->states[row].belongs;
    double chance = missing(asked, row, belongs);
    double from = snapshot_number(asked->agreement, "from");
    if (chance < from) {
        return chance;
    }
    double others = promise - (is_likely(asked, belongs) ? chance : 0.0);
    double share = fmin(chance / from - 1.0, 1.0);
    return (1.0 - share) * chance + share * agreed(asked, others, chance);
}

/* --- all of it ----------------------------------------------------------------------------------
 */

static void take_tags(struct asked *asked, const json_t *tags)
{
    for (size_t i = 0; i < json_array_size(tags); i++) {
        size_t row = snapshot_files_row(asked->files, json_string_value(json_array_get(tags, i)));
        if (row < asked->files->tag_count) {
            asked->states[row].is_given = true;
        }
    }
    asked->has_tags = json_array_size(tags) > 0;
}

void snapshot_chances(struct snapshot_files *files, const json_t *draft, double *ret_scores,
                      double *ret_chances)
{
    struct asked asked = {.files = files,
                          .calibration = files->calibration,
                          .agreement = json_object_get(files->calibration, "agreement"),
                          .floor_score = snapshot_number(files->calibration, "floor_score"),
                          .scores = ret_scores,
                          .states = calloc(files->tag_count + 1, sizeof *asked.states)};
    bool words_speak = false;
    assert_non_null(asked.states);
    snapshot_files_score(files, draft, ret_scores, &words_speak);
    take_tags(&asked, json_object_get(draft, "tags"));
    for (size_t row = 0; row < files->tag_count; row++) {
        struct tag_state *state = &asked.states[row];
        state->on_curve = on_curve(&asked, row);
        state->belongs = words_speak ? state->on_curve : prevalence(&asked, row);
    }
    choose_candidates(&asked);
    double promise = promise_of(&asked);
    for (size_t row = 0; row < files->tag_count; row++) {
        bool is_open = !asked.states[row].is_given && files->tags[row].count > 0.0;
        double chance =
            asked.has_tags ? chance_missing(&asked, row, promise) : asked.states[row].belongs;
        ret_chances[row] = is_open ? chance : NAN;
    }
    free(asked.states);
}
