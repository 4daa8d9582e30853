/* What people say of an item after it was filed, learned as pairs; and the trials that come of it.
 */
#include "daemon/learner/model.h"

#include "tests/unit/examine_fixture.h"

/* --- what a ruling teaches ----------------------------------------------------------------------
 */

static void what_is_found_to_belong_is_taught_to_the_item_and_to_others(void **state)
{
    struct examining *examining = *state;
    double own = learner_score(&examining->learner, DRAFT, 3);
    double others = learner_score(&examining->learner, "log t3q0 t3q1 n7q0", 3);
    entry_find_tag(&examining->ruled, 3);
    examine(examining);
    assert_true(learner_score(&examining->learner, DRAFT, 3) > own + 0.01);
    assert_true(learner_score(&examining->learner, "log t3q0 t3q1 n7q0", 3) > others + 0.005);
}

static void what_is_found_not_to_belong_is_taught_likewise(void **state)
{
    struct examining *examining = *state;
    double own = learner_score(&examining->learner, DRAFT, 3);
    double others = learner_score(&examining->learner, "log t3q0 t3q1 n7q0", 3);
    entry_deny_tag(&examining->ruled, 3);
    examine(examining);
    assert_true(learner_score(&examining->learner, DRAFT, 3) < own - 0.01);
    assert_true(learner_score(&examining->learner, "log t3q0 t3q1 n7q0", 3) < others - 0.005);
}

/* Words have their numbers for good. */
static void assert_same_cell(const struct examining *examining, size_t word, uint32_t tag,
                             enum weights_lane lane)
{
    assert_int_equal(memory_weight(&examining->after->words[word], tag, WEIGHTS_LANES, lane),
                     memory_weight(&examining->before->words[word], tag, WEIGHTS_LANES, lane));
}

static void assert_only_tag_moved(const struct examining *examining, uint32_t tag)
{
    size_t moved = 0;
    for (size_t w = 0; w < MEMORY_WORDS; w++) {
        const struct memory_word *before = &examining->before->words[w];
        const struct memory_word *after = &examining->after->words[w];
        for (uint32_t other = 0; other < STREAM_TAGS; other++) {
            if (other != tag) {
                assert_same_cell(examining, w, other, WEIGHTS_MAIN);
            }
        }
        moved += memory_weight(after, tag, WEIGHTS_LANES, WEIGHTS_MAIN) !=
                 memory_weight(before, tag, WEIGHTS_LANES, WEIGHTS_MAIN);
        assert_int_equal(after->count, before->count);
    }
    assert_true(moved > 0);
    for (uint32_t other = 0; other < STREAM_TAGS; other++) {
        if (other != tag) {
            assert_memory_equal(&examining->after->tags[other], &examining->before->tags[other],
                                sizeof(struct model_tag));
        }
    }
    assert_memory_not_equal(&examining->after->tags[tag].bias, &examining->before->tags[tag].bias,
                            sizeof(struct weights_bias));
}

static void a_ruling_that_a_tag_belongs_moves_no_other_tag(void **state)
{
    struct examining *examining = *state;
    entry_find_tag(&examining->ruled, 3);
    examine(examining);
    assert_only_tag_moved(examining, 3);
}

static void a_ruling_that_a_tag_does_not_belong_moves_no_other_tag(void **state)
{
    struct examining *examining = *state;
    entry_deny_tag(&examining->ruled, 3);
    examine(examining);
    assert_only_tag_moved(examining, 3);
}

static void the_shadow_learns_nothing_of_what_is_said_later(void **state)
{
    struct examining *examining = *state;
    entry_find_tag(&examining->ruled, 3);
    entry_deny_tag(&examining->ruled, 9);
    examine(examining);
    for (size_t w = 0; w < MEMORY_WORDS; w++) {
        for (uint32_t tag = 0; tag < STREAM_TAGS; tag++) {
            assert_same_cell(examining, w, tag, WEIGHTS_SHADOW);
        }
    }
    for (size_t tag = 0; tag < STREAM_TAGS; tag++) {
        assert_memory_equal(&examining->after->tags[tag].shadow_bias,
                            &examining->before->tags[tag].shadow_bias, sizeof(struct weights_bias));
    }
}

/* The pair counts once, as in test_model_learn: -.583899, its word's weight rounded. */
static void a_tag_opened_by_a_ruling_is_learned_once(void **state)
{
    struct learner *learner = &((struct examining *)*state)->learner;
    const struct model_settings settings = learner_settings();
    struct entry fog;
    struct entry ruled;
    learner_renew(learner, &settings);
    entry_set(&fog, "fog", NO_TAGS);
    learner_change(learner, &fog, NULL);
    entry_follow(&ruled, &fog);
    entry_find_tag(&ruled, 0);
    learner_change(learner, &ruled, &fog);
    assert_near(learner_score(learner, "fog", 0), -0.583899, ONE_ROUNDING);
}

/* Tag 77 is in the vocabulary, but on no item. With the logistic loss every other tag is a rival.
 */
static void a_tag_that_nobody_has_used_is_denied_without_a_trace(void **state)
{
    struct examining *examining = *state;
    struct model_settings settings = learner_settings();
    settings.weights.surrogate = SURROGATE_LOGISTIC;
    learner_renew(&examining->learner, &settings);
    entry_set(&examining->filed, "fog", TAGS(0));
    learner_change(&examining->learner, &examining->filed, NULL);
    double score = learner_score(&examining->learner, "fog", 0);
    entry_follow(&examining->ruled, &examining->filed);
    entry_deny_tag(&examining->ruled, 77);
    examine(examining);
    assert_int_equal(learner_size(&examining->learner).tags, 1);
    assert_near(learner_score(&examining->learner, "fog", 0), score, 0.0);
    assert_added(examining, (struct calibrators_cell){.ruled = 0.0});
}

/* --- counts -------------------------------------------------------------------------------------
 */

static void a_tag_that_was_found_is_counted_but_not_as_unprompted(void **state)
{
    struct examining *examining = *state;
    entry_find_tag(&examining->ruled, 3);
    examine(examining);
    const struct model_tag *before = &examining->before->tags[3];
    const struct model_tag *after = &examining->after->tags[3];
    assert_int_equal(after->count, before->count + 1);
    assert_int_equal(after->unprompted, before->unprompted);
    assert_int_equal(examining->after->totals.documents, examining->before->totals.documents);
}

static void a_tag_that_was_taken_off_is_counted_no_more(void **state)
{
    struct examining *examining = *state;
    double score = learner_score(&examining->learner, DRAFT, 20);
    examining->ruled.tag_count = 0;
    entry_deny_tag(&examining->ruled, 20);
    examine(examining);
    assert_int_equal(examining->after->tags[20].count, examining->before->tags[20].count - 1);
    assert_int_equal(examining->after->tags[20].unprompted,
                     examining->before->tags[20].unprompted - 1);
    assert_true(learner_score(&examining->learner, DRAFT, 20) < score - 0.01);
}

static void an_examined_item_that_is_withdrawn_leaves_no_count(void **state)
{
    struct examining *examining = *state;
    struct memory *at_first = memory_new();
    struct entry entry;
    memory_take(at_first, examining->learner.model);
    entry_set(&entry, "wreck salvage", TAGS(1));
    learner_change(&examining->learner, &entry, NULL);
    entry_follow(&examining->ruled, &entry);
    entry_find_tag(&examining->ruled, 3);
    entry_deny_tag(&examining->ruled, 9);
    learner_change(&examining->learner, &examining->ruled, &entry);
    learner_change(&examining->learner, NULL, &examining->ruled);
    memory_take(examining->after, examining->learner.model);
    for (size_t tag = 0; tag < STREAM_TAGS; tag++) {
        assert_int_equal(examining->after->tags[tag].count, at_first->tags[tag].count);
        assert_int_equal(examining->after->tags[tag].unprompted, at_first->tags[tag].unprompted);
    }
    assert_int_equal(examining->after->totals.documents, at_first->totals.documents);
    assert_null(memory_find(examining->after, "salvage"));
    free(at_first);
}

/* --- trials -------------------------------------------------------------------------------------
 */

static double propensity_of(const struct examining *examining, uint32_t tag)
{
    const struct model_tag *counts = &examining->before->tags[tag];
    return propensity_fit_mean(model_fit(examining->learner.model), counts->unprompted,
                               (double)examining->before->totals.documents);
}

static void a_trial_moves_the_propensities_at_once(void **state)
{
    struct examining *examining = *state;
    memory_take(examining->before, examining->learner.model);
    double before = propensity_of(examining, 3);
    assert_near(model_fit(examining->learner.model)->trials, 0.0, 0.0);
    entry_find_tag(&examining->ruled, 3);
    entry_try_tag(&examining->ruled, 3, false);
    examining->ruled.checked_below = STREAM_TAGS;
    examine(examining);
    assert_near(model_fit(examining->learner.model)->trials, 1.0, 0.0);
    assert_true(propensity_of(examining, 3) < before - 1e-3);
    assert_int_equal(examining->after->tags[3].trial_halves, 2);
    assert_int_equal(examining->after->tags[3].given_halves, 0);
}

static void a_withdrawn_item_takes_its_trials_with_it(void **state)
{
    struct examining *examining = *state;
    const struct propensity_curve curve = propensity_curve_default();
    struct propensity_fit without;
    propensity_fit_default(&curve, &without);
    entry_try_tag(&examining->ruled, 20, true);
    entry_find_tag(&examining->ruled, 3);
    entry_try_tag(&examining->ruled, 3, false);
    examine(examining);
    assert_near(model_fit(examining->learner.model)->trials, 2.0, 0.0);
    learner_change(&examining->learner, NULL, &examining->ruled);
    memory_take(examining->after, examining->learner.model);
    assert_int_equal(examining->after->tags[3].trial_halves, 0);
    assert_int_equal(examining->after->tags[20].trial_halves, 0);
    assert_int_equal(examining->after->tags[20].given_halves, 0);
    assert_near(model_fit(examining->learner.model)->trials, 0.0, 0.0);
    assert_near(propensity_of(examining, 3),
                propensity_fit_mean(&without, examining->before->tags[3].unprompted,
                                    (double)examining->before->totals.documents),
                1e-12);
}

static void a_revised_item_keeps_its_trials_once(void **state)
{
    struct examining *examining = *state;
    struct entry revised;
    entry_try_tag(&examining->ruled, 20, true);
    examine(examining);
    entry_set(&revised, DRAFT, TAGS(20));
    entry_try_tag(&revised, 20, true);
    learner_change(&examining->learner, &revised, &examining->ruled);
    memory_take(examining->after, examining->learner.model);
    assert_int_equal(examining->after->tags[20].trial_halves, 2);
    assert_near(model_fit(examining->learner.model)->trials, 1.0, 0.0);
}

/* --- without what it replaces -------------------------------------------------------------------
 */

/* As when all is learned again, and the record of the filing was erased long ago. */
static void an_examined_item_whose_filing_is_gone_is_learned_as_new(void **state)
{
    struct examining *examining = *state;
    struct entry ruled;
    entry_set(&ruled, "wreck salvage", TAGS(1));
    ruled.same_words = true;
    entry_find_tag(&ruled, 3);
    entry_deny_tag(&ruled, 9);
    memory_take(examining->before, examining->learner.model);
    learner_change(&examining->learner, &ruled, NULL);
    memory_take(examining->after, examining->learner.model);
    assert_int_equal(examining->after->totals.documents, examining->before->totals.documents + 1);
    assert_int_equal(examining->after->totals.evidence_items,
                     examining->before->totals.evidence_items + 1);
    assert_int_equal(memory_find(examining->after, "salvage")->count, 1);
    assert_int_equal(examining->after->tags[1].unprompted,
                     examining->before->tags[1].unprompted + 1);
    assert_int_equal(examining->after->tags[3].count, examining->before->tags[3].count + 1);
    assert_int_equal(examining->after->tags[3].unprompted, examining->before->tags[3].unprompted);
    assert_true(learner_lists(&examining->learner, &ruled));
    assert_int_equal(standing_items(model_standing(examining->learner.model)), 402);
}

int main(void)
{
#define TEST(name) cmocka_unit_test_setup_teardown(name, examining_set_up, examining_tear_down)
    const struct CMUnitTest tests[] = {
        TEST(what_is_found_to_belong_is_taught_to_the_item_and_to_others),
        TEST(what_is_found_not_to_belong_is_taught_likewise),
        TEST(a_ruling_that_a_tag_belongs_moves_no_other_tag),
        TEST(a_ruling_that_a_tag_does_not_belong_moves_no_other_tag),
        TEST(the_shadow_learns_nothing_of_what_is_said_later),
        TEST(a_tag_opened_by_a_ruling_is_learned_once),
        TEST(a_tag_that_nobody_has_used_is_denied_without_a_trace),
        TEST(a_tag_that_was_found_is_counted_but_not_as_unprompted),
        TEST(a_tag_that_was_taken_off_is_counted_no_more),
        TEST(an_examined_item_that_is_withdrawn_leaves_no_count),
        TEST(a_trial_moves_the_propensities_at_once),
        TEST(a_withdrawn_item_takes_its_trials_with_it),
        TEST(a_revised_item_keeps_its_trials_once),
        TEST(an_examined_item_whose_filing_is_gone_is_learned_as_new),
    };
    return cmocka_run_group_tests_name("examining", tests, NULL, NULL);
}
