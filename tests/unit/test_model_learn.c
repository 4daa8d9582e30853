/*
 * What the model makes of an item: counts, evidence, the factor of a given pair, and weights. By
 * hand as in test_weights_learn: an entry of one word has x = 1, and with a step of .5 the rates of
 * its first example are .124611 for the word and .061733 for the bias, D = .186344. The bias of a
 * tag that one item has stays at 0, so that the word's part alone of the rise by α·D is seen,
 * .124611/.186344 = .668715 of it: s = -1 + .668715·2·(1 - e^(-2·.186344·h)), which is -.583899 for
 * h = 1 and -.099791 for h = 3. The weight of its word is rounded once, by less than a step, and so
 * is the score (ONE_ROUNDING).
 */
#include "daemon/learner/model.h"

#include "tests/unit/model_fixture.h"
#include "tests/unit/model_memory.h"

/* All that the model holds, as parts: nothing is ever said to be stored here. */
static const struct memory *parts_of(const struct learner *learner)
{
    static struct memory memory;
    memory_clear(&memory);
    memory_take(&memory, learner->model);
    return &memory;
}

static struct model_totals totals_of(const struct learner *learner)
{
    return parts_of(learner)->totals;
}

/* --- counts -------------------------------------------------------------------------------------
 */

static void a_new_model_knows_nothing(void **state)
{
    struct model_size size = learner_size(*state);
    assert_int_equal(size.documents, 0);
    assert_int_equal(size.words, 0);
    assert_int_equal(size.tags, 0);
    assert_int_equal(size.postings, 0);
}

static void an_item_brings_in_its_words_and_tags(void **state)
{
    const struct learner *learner = *state;
    learner_file(learner, "fog bell", TAGS(0, 2));
    learner_file(learner, "fog lamp", TAGS(2));
    struct model_size size = learner_size(learner);
    assert_int_equal(size.documents, 2);
    assert_int_equal(size.words, 3);
    assert_int_equal(size.tags, 3); /* 0 to 2 */
    const struct memory *parts = parts_of(learner);
    assert_int_equal(memory_find(parts, "fog")->count, 2);
    assert_int_equal(memory_find(parts, "bell")->count, 1);
    assert_int_equal(parts->tags[0].count, 1);
    assert_int_equal(parts->tags[2].count, 2);
    assert_int_equal(parts->tags[2].unprompted, 2);
}

static void an_item_may_have_neither_words_nor_tags(void **state)
{
    const struct learner *learner = *state;
    learner_file(learner, "", NO_TAGS);
    learner_file(learner, "", TAGS(0));
    learner_file(learner, "fog", NO_TAGS);
    struct model_size size = learner_size(learner);
    assert_int_equal(size.documents, 3);
    assert_int_equal(size.words, 1);
    assert_int_equal(size.tags, 1);
    assert_int_equal(size.postings, 0);
}

static void a_prompted_tag_is_not_counted_as_given_unprompted(void **state)
{
    const struct learner *learner = *state;
    learner_file(learner, "fog", TAGS(0));
    learner_file_prompted(learner, "fog", TAGS(0));
    const struct memory *parts = parts_of(learner);
    assert_int_equal(parts->tags[0].count, 2);
    assert_int_equal(parts->tags[0].unprompted, 1);
}

static void a_withdrawn_item_takes_its_counts_with_it(void **state)
{
    const struct learner *learner = *state;
    struct entry fog;
    entry_set(&fog, "fog bell", TAGS(0, 1));
    entry_add_tag(fog.examined, &fog.examined_count, 1);
    learner_file(learner, "fog lamp", TAGS(0));
    learner_change(learner, &fog, NULL);
    learner_change(learner, NULL, &fog);
    const struct memory *parts = parts_of(learner);
    assert_int_equal(parts->totals.documents, 1);
    assert_int_equal(memory_find(parts, "fog")->count, 1);
    assert_null(memory_find(parts, "bell"));
    assert_int_equal(parts->tags[0].count, 1);
    assert_int_equal(parts->tags[0].unprompted, 1);
    assert_int_equal(parts->tags[1].count, 0);
    assert_int_equal(parts->tags[1].unprompted, 0);
}

static void a_revised_item_takes_its_old_counts_with_it(void **state)
{
    const struct learner *learner = *state;
    struct entry old;
    struct entry revised;
    entry_set(&old, "fog bell", TAGS(0));
    entry_set(&revised, "fog lamp", TAGS(1));
    learner_change(learner, &old, NULL);
    learner_change(learner, &revised, &old);
    const struct memory *parts = parts_of(learner);
    assert_int_equal(parts->totals.documents, 1);
    assert_int_equal(memory_find(parts, "fog")->count, 1);
    assert_int_equal(memory_find(parts, "lamp")->count, 1);
    assert_null(memory_find(parts, "bell"));
    assert_int_equal(parts->tags[0].count, 0);
    assert_int_equal(parts->tags[1].count, 1);
}

static void a_word_that_a_revision_keeps_keeps_its_weights(void **state)
{
    const struct learner *learner = *state;
    struct entry old;
    struct entry revised;
    entry_set(&old, "fog", TAGS(0));
    entry_set(&revised, "fog lamp", NO_TAGS);
    learner_change(learner, &old, NULL);
    learner_change(learner, &revised, &old);
    assert_int_equal(learner_size(learner).postings, 1);
}

static void when_every_item_is_withdrawn_no_word_is_left(void **state)
{
    static struct entry entries[100];
    const struct learner *learner = *state;
    struct stream stream = {.random = {3}, .tag_count = 20, .given_share = 0.8};
    uint32_t truth[ENTRY_TAGS];
    for (size_t i = 0; i < 100; i++) {
        (void)stream_next(&stream, &entries[i], truth);
        learner_change(learner, &entries[i], NULL);
    }
    assert_true(learner_size(learner).postings > 0);
    for (size_t i = 0; i < 100; i++) {
        learner_change(learner, NULL, &entries[i * 37 % 100]);
    }
    struct model_size size = learner_size(learner);
    assert_int_equal(size.documents, 0);
    assert_int_equal(size.words, 0);
    assert_int_equal(size.postings, 0);
    const struct memory *parts = parts_of(learner);
    for (size_t tag = 0; tag < size.tags; tag++) {
        assert_int_equal(parts->tags[tag].count, 0);
        assert_int_equal(parts->tags[tag].unprompted, 0);
    }
}

/* --- evidence -----------------------------------------------------------------------------------
 */

/* All of it, in pairs as of now. */
static struct calibrators_cell evidence_of(const struct learner *learner)
{
    return memory_evidence(parts_of(learner), CALIBRATORS_BINS);
}

static void a_tag_used_for_the_first_time_is_no_evidence(void **state)
{
    const struct learner *learner = *state;
    learner_file(learner, "fog", TAGS(0, 1));
    assert_near(evidence_of(learner).pairs, 0.0, 0.0);
    assert_near(evidence_of(learner).given, 0.0, 0.0);
}

static void every_tag_known_before_is_a_pair(void **state)
{
    struct learner *learner = *state;
    struct model_settings settings = learner_settings();
    settings.evidence_half_life_items = 1e18; /* nothing fades */
    learner_renew(learner, &settings);
    learner_file(learner, "fog", TAGS(0, 1, 2));
    learner_file(learner, "bell", TAGS(1, 3)); /* pairs with 0, 1, 2; 1 is given */
    struct calibrators_cell evidence = evidence_of(learner);
    assert_near(evidence.pairs, 3.0, 1e-9);
    assert_near(evidence.given, 1.0, 1e-9);
    assert_near(evidence.known, 0.0, 0.0);
    learner_renew(learner, &settings);
    learner_file(learner, "fog", TAGS(0));
    learner_file_prompted(learner, "fog", TAGS(0));
    evidence = evidence_of(learner);
    assert_near(evidence.known, 1.0, 1e-9);
    assert_near(evidence.known_true, 1.0, 1e-9);
    assert_near(evidence.pairs, 0.0, 0.0); /* what was examined is known, and no longer a pair */
    assert_near(evidence.given, 0.0, 0.0);
}

/* A tag that only a withdrawn item had still has its weights: it could have been proposed. */
static void a_tag_that_comes_back_is_evidence(void **state)
{
    struct learner *learner = *state;
    struct model_settings settings = learner_settings();
    struct entry fog;
    settings.evidence_half_life_items = 1e18;
    learner_renew(learner, &settings);
    entry_set(&fog, "fog", TAGS(0));
    learner_change(learner, &fog, NULL);
    learner_file(learner, "fog bell", NO_TAGS);
    learner_change(learner, NULL, &fog);
    struct calibrators_cell before = evidence_of(learner);
    learner_file(learner, "fog", TAGS(0));
    assert_near(evidence_of(learner).pairs, before.pairs + 1.0, 1e-9);
    assert_near(evidence_of(learner).given, before.given + 1.0, 1e-9);
}

/* One pair before a half-life of one item: a half of it, and the new one. */
static void evidence_fades_with_the_items_that_come_after(void **state)
{
    struct learner *learner = *state;
    struct model_settings settings = learner_settings();
    settings.evidence_half_life_items = 1.0;
    learner_renew(learner, &settings);
    learner_file(learner, "fog", TAGS(0));
    learner_file(learner, "fog", TAGS(0));
    assert_near(evidence_of(learner).pairs, 1.0, 1e-9);
    learner_file(learner, "fog", TAGS(0));
    assert_near(evidence_of(learner).pairs, 1.5, 1e-9);
}

/* Before the second entry is learned its tag scores -.583899, give or take .000488: in bin
 * (-.583899 + .98)/.02 = 19.8 ± .03, so 19, and one on for the floor's. */
static void what_counts_is_the_score_before_learning(void **state)
{
    struct learner *learner = *state;
    struct model_settings settings = learner_settings();
    settings.correction = false;
    learner_renew(learner, &settings);
    learner_file(learner, "fog", TAGS(0));
    learner_file(learner, "fog", TAGS(0));
    assert_true(memory_evidence(parts_of(learner), 20).pairs > 0.0);
}

static void a_revision_is_no_new_evidence(void **state)
{
    const struct learner *learner = *state;
    struct entry fog;
    entry_set(&fog, "fog", TAGS(0));
    learner_change(learner, &fog, NULL);
    learner_change(learner, &fog, NULL);
    double pairs = evidence_of(learner).pairs;
    learner_change(learner, &fog, &fog);
    assert_near(evidence_of(learner).pairs, pairs, 0.0);
}

/* --- factors ------------------------------------------------------------------------------------
 */

/* One item, one use: p = .5 and the pair counts three times. */
static void the_correction_weighs_a_given_pair_by_its_propensity(void **state)
{
    learner_file(*state, "fog", TAGS(0));
    assert_near(learner_score(*state, "fog", 0), -0.099791, ONE_ROUNDING);
}

static void without_the_correction_a_pair_counts_once(void **state)
{
    struct learner *learner = *state;
    struct model_settings settings = learner_settings();
    settings.correction = false;
    learner_renew(learner, &settings);
    learner_file(learner, "fog", TAGS(0));
    assert_near(learner_score(learner, "fog", 0), -0.583899, ONE_ROUNDING);
}

static void where_somebody_looked_a_pair_counts_once(void **state)
{
    learner_file_prompted(*state, "fog", TAGS(0));
    assert_near(learner_score(*state, "fog", 0), -0.583899, ONE_ROUNDING);
}

/* Second use of two items: p = 1/(1 + (2.5/3.5)^.55), 2/p - 1 = 1 + 2·.831054. */
static void the_mean_of_the_factors_is_over_given_pairs(void **state)
{
    struct learner *learner = *state;
    struct model_settings settings = learner_settings();
    settings.even_out = true;
    learner_renew(learner, &settings);
    learner_file(learner, "fog", TAGS(0));
    assert_near(totals_of(learner).factor_sum, 3.0, 1e-12);
    learner_file(learner, "bell", TAGS(0));
    assert_near(totals_of(learner).factor_sum, 3.0 + 2.662108, 1e-5);
    assert_int_equal(totals_of(learner).factor_count, 2);
}

/* 3/(3/1) = 1: the first pair of all counts once. */
static void evened_out_a_pair_counts_relative_to_the_mean(void **state)
{
    struct learner *learner = *state;
    struct model_settings settings = learner_settings();
    settings.even_out = true;
    learner_renew(learner, &settings);
    learner_file(learner, "fog", TAGS(0));
    assert_near(learner_score(learner, "fog", 0), -0.583899, ONE_ROUNDING);
}

/* β = .5: 1 for a tag's first use, .5/(1 - .25) for its second. */
static void the_balance_weighs_a_tag_by_its_effective_number(void **state)
{
    struct learner *learner = *state;
    struct model_settings settings = learner_settings();
    settings.correction = false;
    settings.even_out = true;
    settings.balance = 0.5;
    learner_renew(learner, &settings);
    learner_file(learner, "fog", TAGS(0));
    assert_near(totals_of(learner).factor_sum, 1.0, 1e-12);
    learner_file(learner, "bell", TAGS(0));
    assert_near(totals_of(learner).factor_sum, 1.0 + 2.0 / 3.0, 1e-12);
}

static void the_balance_changes_what_is_learned(void **state)
{
    struct learner *learner = *state;
    struct model_settings settings = learner_settings();
    double scores[2];
    for (int i = 0; i < 2; i++) {
        settings.balance = i == 0 ? 0.0 : 0.9;
        learner_renew(learner, &settings);
        learner_file(learner, "fog", TAGS(0));
        learner_file(learner, "bell", TAGS(0));
        scores[i] = learner_score(learner, "bell", 0);
    }
    assert_true(scores[1] < scores[0] - 4.0 * ONE_ROUNDING); /* of two items each */
}

/* --- the step -----------------------------------------------------------------------------------
 */

/* The same move, rounded down in one item and up in another, differs by a step (and by what a float
 * loses of a score below 1). */
#define SAME_STEP (ONE_ROUNDING + 1e-6)

static double score_by_step_and_loss(struct learner *learner, enum surrogate loss, double step,
                                     uint32_t tag)
{
    struct model_settings settings = learner_settings();
    settings.step = step;
    settings.weights.surrogate = loss;
    learner_renew(learner, &settings);
    learner_file(learner, "fog", &tag, 1);
    return learner_score(learner, "fog", tag);
}

static double score_by_step(struct learner *learner, double step, uint32_t tag)
{
    return score_by_step_and_loss(learner, SURROGATE_SQUARED_HINGE, step, tag);
}

static void the_logistic_loss_learns_with_eight_times_the_step(void **state)
{
    assert_near(score_by_step_and_loss(*state, SURROGATE_LOGISTIC, 0.0, 900),
                score_by_step_and_loss(*state, SURROGATE_LOGISTIC, 8.0 * 0.3, 900), SAME_STEP);
}

static void a_small_vocabulary_learns_with_the_smaller_step(void **state)
{
    assert_near(score_by_step(*state, 0.0, 900), score_by_step(*state, 0.3, 900), SAME_STEP);
    assert_true(score_by_step(*state, 0.3, 900) < score_by_step(*state, 0.5, 900) - 0.05);
}

/* Tags 0 to 1,999 are two thousand. Only the best of them are listed. */
static void two_thousand_tags_learn_with_the_larger_step(void **state)
{
    assert_near(score_by_step(*state, 0.0, 1998), score_by_step(*state, 0.3, 1998), SAME_STEP);
    assert_near(score_by_step(*state, 0.0, 1999), score_by_step(*state, 0.5, 1999), SAME_STEP);
}

/* --- learning -----------------------------------------------------------------------------------
 */

/* Learns a stream and gives the share of new entries whose best tag belongs. */
static double precision_after(struct learner *learner, const struct model_settings *settings,
                              double given_share)
{
    enum {
        LEARNED = 1500,
        TESTED = 300
    };
    struct stream stream = {.random = {9}, .tag_count = 30, .given_share = given_share};
    struct entry entry;
    uint32_t truth[ENTRY_TAGS];
    int hits = 0;
    learner_renew(learner, settings);
    for (int i = 0; i < LEARNED; i++) {
        (void)stream_next(&stream, &entry, truth);
        learner_change(learner, &entry, NULL);
    }
    for (int i = 0; i < TESTED; i++) {
        size_t belonging = stream_next(&stream, &entry, truth);
        struct model_question question = entry_question(&entry);
        question.most = 1;
        struct model_answer answer = learner_answer(learner, &question);
        for (size_t k = 0; k < belonging; k++) {
            hits += answer.gap_count > 0 && answer.gaps[0].tag == truth[k];
        }
    }
    return (double)hits / TESTED;
}

static void each_surrogate_learns_a_stream(void **state)
{
    const enum surrogate kinds[] = {SURROGATE_SQUARED_HINGE, SURROGATE_HINGE, SURROGATE_LOGISTIC};
    for (size_t i = 0; i < 3; i++) {
        struct model_settings settings = learner_settings();
        settings.weights.surrogate = kinds[i];
        assert_true(precision_after(*state, &settings, 1.0) > 0.95);
    }
}

static void a_stream_is_learned_although_half_of_its_tags_are_missing(void **state)
{
    struct model_settings settings = learner_settings();
    assert_true(precision_after(*state, &settings, 0.5) > 0.9);
}

static void each_setting_learns_a_stream(void **state)
{
    struct model_settings settings = learner_settings();
    settings.correction = false;
    assert_true(precision_after(*state, &settings, 0.8) > 0.9);
    settings = learner_settings();
    settings.even_out = true;
    assert_true(precision_after(*state, &settings, 0.8) > 0.9);
    settings = learner_settings();
    settings.balance = 0.99;
    assert_true(precision_after(*state, &settings, 0.8) > 0.9);
    settings = learner_settings();
    settings.weights.specificity = 100.0;
    assert_true(precision_after(*state, &settings, 0.8) > 0.9);
}

int main(void)
{
#define model_test(name) cmocka_unit_test_setup_teardown(name, learner_set_up, learner_tear_down)
    const struct CMUnitTest tests[] = {
        model_test(a_new_model_knows_nothing),
        model_test(an_item_brings_in_its_words_and_tags),
        model_test(an_item_may_have_neither_words_nor_tags),
        model_test(a_prompted_tag_is_not_counted_as_given_unprompted),
        model_test(a_withdrawn_item_takes_its_counts_with_it),
        model_test(a_revised_item_takes_its_old_counts_with_it),
        model_test(a_word_that_a_revision_keeps_keeps_its_weights),
        model_test(when_every_item_is_withdrawn_no_word_is_left),
        model_test(a_tag_used_for_the_first_time_is_no_evidence),
        model_test(every_tag_known_before_is_a_pair),
        model_test(a_tag_that_comes_back_is_evidence),
        model_test(evidence_fades_with_the_items_that_come_after),
        model_test(what_counts_is_the_score_before_learning),
        model_test(a_revision_is_no_new_evidence),
        model_test(the_correction_weighs_a_given_pair_by_its_propensity),
        model_test(without_the_correction_a_pair_counts_once),
        model_test(where_somebody_looked_a_pair_counts_once),
        model_test(the_mean_of_the_factors_is_over_given_pairs),
        model_test(evened_out_a_pair_counts_relative_to_the_mean),
        model_test(the_balance_weighs_a_tag_by_its_effective_number),
        model_test(the_balance_changes_what_is_learned),
        model_test(a_small_vocabulary_learns_with_the_smaller_step),
        model_test(two_thousand_tags_learn_with_the_larger_step),
        model_test(the_logistic_loss_learns_with_eight_times_the_step),
        model_test(each_surrogate_learns_a_stream),
        model_test(a_stream_is_learned_although_half_of_its_tags_are_missing),
        model_test(each_setting_learns_a_stream),
    };
    return cmocka_run_group_tests_name("learning", tests, NULL, NULL);
}
