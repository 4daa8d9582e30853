/* calibration.json has the points between which a model's chances lie on straight lines. */
#include "daemon/snapshot/snapshot_calibration.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "daemon/learner/model_chances.h"
#include "tests/unit/model_fixture.h"

enum {
    ENTRIES = 300
};

/* A learner with some evidence behind its chances, and what it says of them. */
struct scene {
    struct learner learner;
    json_t *calibration;
};

/* Two of three entries have the tags 0 and 1, the third one has tag 2. */
static void teach(const struct learner *learner)
{
    for (int i = 0; i < ENTRIES; i++) {
        const char *words = i % 2 == 0 ? "fog bell north" : "oil lamp north";
        if (i % 3 == 0) {
            learner_file(learner, words, TAGS(2));
        } else {
            learner_file(learner, words, TAGS(0, 1));
        }
    }
}

static int set_up(void **state)
{
    static struct scene scene;
    const struct model_settings settings = learner_settings();
    learner_renew(&scene.learner, &settings);
    teach(&scene.learner);
    scene.calibration = snapshot_calibration_json(scene.learner.model);
    *state = &scene;
    return scene.calibration ? 0 : -1;
}

static int tear_down(void **state)
{
    struct scene *scene = *state;
    json_decref(scene->calibration);
    learner_free(&scene->learner);
    return 0;
}

/* --- looking things up --------------------------------------------------------------------------
 */

static double real_at(const json_t *array, size_t at)
{
    assert_true(at < json_array_size(array));
    return json_number_value(json_array_get(array, at));
}

static double real_of(const json_t *object, const char *name)
{
    assert_true(json_is_number(json_object_get(object, name)));
    return json_number_value(json_object_get(object, name));
}

/* On straight lines between the points, level outside. */
static double on_lines(const json_t *points, const json_t *values, double at)
{
    size_t count = json_array_size(points);
    assert_int_equal(json_array_size(values), count);
    size_t i = 0;
    while (i < count && real_at(points, i) < at) {
        i++;
    }
    if (i == 0 || i == count) {
        return real_at(values, i == 0 ? 0 : count - 1);
    }
    double share = (at - real_at(points, i - 1)) / (real_at(points, i) - real_at(points, i - 1));
    return (1.0 - share) * real_at(values, i - 1) + share * real_at(values, i);
}

/* --- P(belongs) ---------------------------------------------------------------------------------
 */

static double belongs(const json_t *calibration, double propensity, double score)
{
    const json_t *curves = json_object_get(calibration, "belongs");
    const json_t *groups = json_object_get(curves, "groups");
    size_t group = 0;
    for (;; group++) {
        const json_t *below = json_object_get(json_array_get(groups, group), "propensity_below");
        if (json_is_null(below) || propensity < json_number_value(below)) {
            break;
        }
    }
    const json_t *curve = json_array_get(groups, group);
    return score <= real_of(calibration, "floor_score")
               ? real_of(curve, "at_floor")
               : on_lines(json_object_get(curves, "scores"), json_object_get(curve, "chances"),
                          score);
}

static void a_chance_to_belong_is_on_the_line_of_its_group(void **state)
{
    const struct scene *scene = *state;
    const struct calibrators_curves *curves = model_curves(scene->learner.model);
    for (int i = 1; i <= 20; i++) {
        for (int j = 0; j < 190; j++) {
            double propensity = 0.05 * i;
            double score = -1.25 + 0.0173 * j;
            assert_near(belongs(scene->calibration, propensity, score),
                        calibrators_chance(curves, propensity, score), 1e-12);
        }
    }
}

static void at_the_floor_and_a_little_above_it_the_chances_are_told_apart(void **state)
{
    const struct scene *scene = *state;
    const struct calibrators_curves *curves = model_curves(scene->learner.model);
    const double scores[] = {-0.98, -0.9799999, -0.9701, -0.97, -0.96, 1.55, 1.56, 1.57};
    for (size_t i = 0; i < sizeof scores / sizeof scores[0]; i++) {
        assert_near(belongs(scene->calibration, 0.4, scores[i]),
                    calibrators_chance(curves, 0.4, scores[i]), 1e-12);
    }
    assert_true(belongs(scene->calibration, 0.4, -0.98) <
                belongs(scene->calibration, 0.4, -0.9799999));
}

/* --- P(missing) ---------------------------------------------------------------------------------
 */

static double in_row(const json_t *agreement, size_t row, double missing)
{
    const json_t *points = json_object_get(agreement, "missing");
    const json_t *chances =
        json_object_get(json_array_get(json_object_get(agreement, "rows"), row), "chances");
    double first = real_at(points, 0);
    if (missing < first) {
        return real_at(chances, 0) * missing / first;
    }
    json_t *logits = json_array();
    for (size_t i = 0; i < json_array_size(points); i++) {
        double point = real_at(points, i);
        assert_int_equal(json_array_append_new(logits, json_real(log(point / (1.0 - point)))), 0);
    }
    double found = on_lines(logits, chances, log(missing / (1.0 - missing)));
    json_decref(logits);
    return found;
}

static double agreed(const json_t *calibration, double promise, double missing)
{
    const json_t *agreement = json_object_get(calibration, "agreement");
    const json_t *rows = json_object_get(agreement, "rows");
    json_t *promises = json_array();
    json_t *chances = json_array();
    for (size_t row = 0; row < json_array_size(rows); row++) {
        json_t *place = json_object_get(json_array_get(rows, row), "promise");
        assert_int_equal(json_array_append(promises, place), 0);
        assert_int_equal(json_array_append_new(chances, json_real(in_row(agreement, row, missing))),
                         0);
    }
    double found = on_lines(promises, chances, promise);
    json_decref(promises);
    json_decref(chances);
    return found;
}

static void an_agreed_chance_is_on_the_lines_of_promise_and_chance(void **state)
{
    const struct scene *scene = *state;
    const struct agreement *agreement = model_agreement(scene->learner.model);
    for (int i = 0; i < 33; i++) {
        for (int j = 0; j < 90; j++) {
            double promise = 0.37 * i;
            double missing = 0.001 + 0.0111 * j;
            assert_near(agreed(scene->calibration, promise, missing),
                        agreement_chance(agreement, promise, missing), 1e-9);
        }
    }
}

/* floor(log2(300/200)) = 0 for the tags of 200 entries, floor(log2(300/100)) = 1 for that of 100.
 */
static void the_least_propensities_are_by_octaves(void **state)
{
    const struct scene *scene = *state;
    const struct model *model = scene->learner.model;
    const json_t *least =
        json_object_get(json_object_get(scene->calibration, "least_propensities"), "least");
    const size_t class_of_tag[] = {0, 0, 1};
    for (uint32_t tag = 0; tag < 3; tag++) {
        double allowed = fmax(model_propensity(model, tag), real_at(least, class_of_tag[tag]));
        assert_near(model_tag_allowed_propensity(model, tag), allowed, 1e-12);
    }
    assert_true(real_at(least, 0) > 0.0);
}

/* --- the rest -----------------------------------------------------------------------------------
 */

static void bands_come_from_frequent_to_rare_and_leave_no_count_out(void **state)
{
    const struct scene *scene = *state;
    const json_t *bands = json_object_get(scene->calibration, "bands");
    assert_int_equal(json_array_size(bands), 3);
    for (size_t i = 0; i < 3; i++) {
        double from = real_of(json_array_get(bands, i), "count_from");
        const char *name = json_string_value(json_object_get(json_array_get(bands, i), "name"));
        assert_string_equal(name, standing_band_name(standing_band_of(from)));
    }
    assert_near(real_of(json_array_get(bands, 2), "count_from"), 0.0, 0.0);
}

static void it_says_how_many_items_there_are_and_whether_it_is_early(void **state)
{
    const struct scene *scene = *state;
    assert_near(real_of(scene->calibration, "documents"), ENTRIES, 0.0);
    assert_true(json_is_false(json_object_get(scene->calibration, "early")));
}

static void a_model_that_knows_nothing_is_early(void **state)
{
    (void)state;
    struct learner learner = {0};
    const struct model_settings settings = learner_settings();
    learner_renew(&learner, &settings);
    json_t *calibration = snapshot_calibration_json(learner.model);
    assert_true(json_is_true(json_object_get(calibration, "early")));
    json_decref(calibration);
    learner_free(&learner);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_chance_to_belong_is_on_the_line_of_its_group),
        cmocka_unit_test(at_the_floor_and_a_little_above_it_the_chances_are_told_apart),
        cmocka_unit_test(an_agreed_chance_is_on_the_lines_of_promise_and_chance),
        cmocka_unit_test(the_least_propensities_are_by_octaves),
        cmocka_unit_test(bands_come_from_frequent_to_rare_and_leave_no_count_out),
        cmocka_unit_test(it_says_how_many_items_there_are_and_whether_it_is_early),
        cmocka_unit_test(a_model_that_knows_nothing_is_early),
    };
    return cmocka_run_group_tests_name("snapshot_calibration", tests, set_up, tear_down);
}
