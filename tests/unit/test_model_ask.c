/* What the model answers: which tags, how likely, how many in all, and for which words. */
#include "daemon/learner/model.h"

#include "tests/unit/model_fixture.h"

/* --- a model that knows next to nothing ---------------------------------------------------------
 */

static void an_empty_model_proposes_nothing_and_says_that_it_is_early(void **state)
{
    struct model_answer answer = learner_ask(*state, "fog bell");
    assert_int_equal(answer.gap_count, 0);
    assert_near(answer.expected, 0.0, 0.0);
    assert_true(answer.early);
}

static void a_question_without_a_word_is_answered(void **state)
{
    learner_file(*state, "fog", TAGS(0));
    struct model_answer answer = learner_ask(*state, "");
    assert_int_equal(answer.gap_count, 1);
}

static void one_entry_is_enough_to_propose_its_tag(void **state)
{
    learner_file(*state, "fog bell", TAGS(0));
    struct model_answer answer = learner_ask(*state, "fog");
    assert_int_equal(answer.gap_count, 1);
    assert_int_equal(answer.gaps[0].tag, 0);
    assert_true(answer.early);
}

static void with_two_hundred_given_pairs_it_is_early_no_more(void **state)
{
    const struct learner *learner = *state;
    for (int i = 0; i < 150; i++) {
        learner_file(learner, "fog bell", TAGS(0, 1));
    }
    assert_false(learner_ask(learner, "fog").early);
}

/* --- which tags ---------------------------------------------------------------------------------
 */

static void the_tags_that_the_words_speak_for_come_first(void **state)
{
    struct model_answer answer = learner_ask(*state, DRAFT);
    assert_true((answer.gaps[0].tag == 3 && answer.gaps[1].tag == 9) ||
                (answer.gaps[0].tag == 9 && answer.gaps[1].tag == 3));
}

static void the_answer_comes_by_falling_chance(void **state)
{
    struct model_answer answer = learner_ask(*state, DRAFT);
    for (size_t i = 1; i < answer.gap_count; i++) {
        assert_true(answer.gaps[i].chance <= answer.gaps[i - 1].chance);
    }
}

static void every_tag_is_listed_once_when_there_is_no_floor(void **state)
{
    struct model_answer answer = learner_ask(*state, DRAFT);
    assert_int_equal(answer.gap_count, STREAM_TAGS);
    for (uint32_t tag = 0; tag < STREAM_TAGS; tag++) {
        assert_non_null(find_gap(&answer, tag));
    }
}

static void what_is_given_or_excluded_is_never_proposed(void **state)
{
    struct entry entry;
    struct model_question question = draft_question(&entry);
    for (int tagged = 0; tagged < 2; tagged++) {
        question.tagged = tagged != 0;
        question.given = (const uint32_t[]){3, 7};
        question.given_count = 2;
        question.excluded = (const uint32_t[]){9, 7};
        question.excluded_count = 2;
        struct model_answer answer = learner_answer(*state, &question);
        assert_int_equal(answer.gap_count, STREAM_TAGS - 3);
        assert_null(find_gap(&answer, 3));
        assert_null(find_gap(&answer, 7));
        assert_null(find_gap(&answer, 9));
    }
}

static void what_one_question_excludes_the_next_may_propose(void **state)
{
    struct entry entry;
    struct model_question question = draft_question(&entry);
    question.excluded = (const uint32_t[]){3};
    question.excluded_count = 1;
    (void)learner_answer(*state, &question);
    struct model_answer answer = learner_ask(*state, DRAFT);
    assert_non_null(find_gap(&answer, 3));
}

static void a_given_tag_that_nobody_knows_is_passed_over(void **state)
{
    struct entry entry;
    struct model_question question = draft_question(&entry);
    double expected = learner_answer(*state, &question).expected;
    question.given = (const uint32_t[]){1000000};
    question.given_count = 1;
    assert_near(learner_answer(*state, &question).expected, expected, 0.0);
}

static void no_more_than_are_asked_for_are_listed(void **state)
{
    struct entry entry;
    struct model_question question = draft_question(&entry);
    struct model_answer answer = learner_answer(*state, &question);
    uint32_t second = answer.gaps[1].tag;
    question.most = 2;
    answer = learner_answer(*state, &question);
    assert_int_equal(answer.gap_count, 2);
    assert_int_equal(answer.gaps[1].tag, second);
    question.most = 0;
    assert_int_equal(learner_answer(*state, &question).gap_count, 0);
}

static void the_first_of_all_are_listed_however_few_are_asked_for(void **state)
{
    struct entry entry;
    struct model_gap all[STREAM_TAGS];
    struct model_question question = draft_question(&entry);
    struct model_answer answer = learner_answer(*state, &question);
    assert_int_equal(answer.gap_count, STREAM_TAGS);
    memcpy(all, answer.gaps, sizeof all);
    for (question.most = 1; question.most < STREAM_TAGS; question.most++) {
        answer = learner_answer(*state, &question);
        assert_int_equal(answer.gap_count, question.most);
        for (size_t i = 0; i < answer.gap_count; i++) {
            assert_int_equal(answer.gaps[i].tag, all[i].tag);
        }
    }
}

static void nothing_below_the_floor_is_listed(void **state)
{
    struct entry entry;
    struct model_question question = draft_question(&entry);
    struct model_answer all = learner_answer(*state, &question);
    size_t above = 0;
    while (above < all.gap_count && all.gaps[above].chance >= 0.05) {
        above++;
    }
    assert_true(above >= 2 && above < all.gap_count);
    question.floor = 0.05;
    struct model_answer answer = learner_answer(*state, &question);
    assert_int_equal(answer.gap_count, above);
    assert_true(answer.gaps[above - 1].chance >= 0.05);
}

static void asking_changes_nothing(void **state)
{
    struct entry entry;
    struct model_question question = draft_question(&entry);
    struct model_answer first = learner_answer(*state, &question);
    double chance = first.gaps[0].chance;
    question.why = true;
    question.tagged = true;
    (void)learner_answer(*state, &question);
    struct model_answer again = learner_ask(*state, DRAFT);
    assert_true(again.gaps[0].chance == chance);
    assert_true(again.expected == first.expected);
}

static void an_answer_follows_what_was_learned_since(void **state)
{
    const struct learner *learner = *state;
    double before = learner_score(learner, "n1q0 n2q0", 30);
    learner_file(learner, "n1q0 n2q0", TAGS(30));
    assert_true(learner_score(learner, "n1q0 n2q0", 30) > before);
}

/* What the desk was shown for a draft is what the item comes in with. */
static void a_draft_has_the_scores_that_it_is_filed_with(void **state)
{
    const struct learner *learner = *state;
    struct stream stream = {.random = {11}, .tag_count = STREAM_TAGS, .given_share = 0.5};
    struct entry entry;
    uint32_t truth[ENTRY_TAGS];
    size_t compared = 0;
    for (int i = 0; i < 50; i++) {
        (void)stream_next(&stream, &entry, truth);
        double scores[STREAM_TAGS] = {0.0};
        struct model_question question = entry_question(&entry);
        struct model_answer answer = learner_answer(learner, &question);
        for (size_t g = 0; g < answer.gap_count; g++) {
            scores[answer.gaps[g].tag] = answer.gaps[g].score;
        }
        learner_change(learner, &entry, NULL);
        const struct worklist_entry listed = learner_listed(learner, &entry);
        for (uint32_t g = 0; g < listed.pair_count; g++) {
            assert_near((double)listed.pairs[g].counted, scores[listed.pairs[g].tag], 1e-6);
            compared++;
        }
    }
    assert_true(compared > 100);
}

/* The scratch keeps what follows from a model's evidence; another model may well lie where the
 * first one lay, and have learned as much. */
static void a_scratch_may_be_used_with_one_model_after_the_other(void **state)
{
    struct learner *learner = *state;
    struct learner fresh = {0};
    struct entry fog;
    const struct model_settings settings = learner_settings();
    const struct siphash_key key = {7, 8};
    for (int i = 0; i < 100; i++) {
        learner_file(learner, "fog bell", TAGS(0, 1));
    }
    (void)learner_ask(learner, "fog");
    model_free(learner->model);
    assert_int_equal(model_new(&settings, &key, &learner->model), 0);
    learner_renew(&fresh, &settings);
    for (int i = 0; i < 99; i++) {
        learner_file(learner, "bell", NO_TAGS);
        learner_file(&fresh, "bell", NO_TAGS);
    }
    entry_set(&fog, "fog", TAGS(0)); /* one for both: rounding follows from its number */
    learner_change(learner, &fog, NULL);
    learner_change(&fresh, &fog, NULL);
    struct model_answer answer = learner_ask(learner, "fog");
    struct model_answer expected = learner_ask(&fresh, "fog");
    assert_true(answer.gaps[0].chance == expected.gaps[0].chance);
    assert_true(answer.expected == expected.expected);
    learner_free(&fresh);
}

/* --- how likely ---------------------------------------------------------------------------------
 */

/*
 * By Bayes' rule from the draft's chance q and the propensity of the tag's count: of 66 entries,
 * tag 0 is on 24 and tag 1 on 12. Neither is likely for the draft: then nothing else has a say.
 * Each was given to three fifths of its entries, of which p = .53 and .44 is no surprise.
 */
static void a_filed_item_s_chances_are_those_of_a_missing_tag(void **state)
{
    const struct learner *learner = *state;
    struct propensity_curve curve = propensity_curve_default();
    struct entry entry;
    struct model_question question;
    double q[2];
    for (int i = 0; i < 60; i++) {
        const uint32_t tag = i % 3 ? 0 : 1;
        learner_file(learner, i % 3 ? "fog bell" : "fog lamp", &tag, i / 3 % 5 < 3 ? 1 : 0);
    }
    for (int i = 0; i < 6; i++) {
        learner_file(learner, "horn", TAGS(2));
    }
    entry_set(&entry, "horn", NO_TAGS);
    question = entry_question(&entry);
    struct model_answer answer = learner_answer(learner, &question);
    for (uint32_t tag = 0; tag < 2; tag++) {
        q[tag] = find_gap(&answer, tag)->chance;
        assert_true(q[tag] > 0.0 && q[tag] < 0.02);
    }
    question.tagged = true;
    answer = learner_answer(learner, &question);
    for (uint32_t tag = 0; tag < 2; tag++) {
        double p = propensity_of_curve(&curve, tag == 0 ? 24.0 : 12.0, 66.0);
        double chance = find_gap(&answer, tag)->chance;
        assert_near(chance / ((1.0 - p) * q[tag] / (1.0 - p * q[tag])), 1.0, 1e-9);
    }
}

/* Ten entries: tag 0 on six of them, tag 1 on two. */
static void file_ten(const struct learner *learner)
{
    for (int i = 0; i < 10; i++) {
        const uint32_t tag = i < 6 ? 0 : 1;
        learner_file(learner, "fog bell", &tag, i < 8 ? 1 : 0);
    }
}

/* Prevalence: the share of the items over the propensity, .6/p and .2/p. */
static void a_document_without_a_known_word_gets_the_commonest_tags(void **state)
{
    const struct learner *learner = *state;
    struct propensity_curve curve = propensity_curve_default();
    file_ten(learner);
    struct model_answer answer = learner_ask(learner, "moon rise");
    assert_int_equal(answer.gap_count, 2);
    assert_int_equal(answer.gaps[0].tag, 0);
    assert_near(answer.gaps[0].chance, fmin(0.6 / propensity_of_curve(&curve, 6.0, 10.0), 1.0),
                1e-12);
    assert_near(answer.gaps[1].chance, 0.2 / propensity_of_curve(&curve, 2.0, 10.0), 1e-12);
    assert_near(answer.expected, answer.gaps[0].chance + answer.gaps[1].chance, 1e-9);
}

static void a_word_that_only_untagged_items_hold_counts_as_unknown(void **state)
{
    const struct learner *learner = *state;
    file_ten(learner);
    learner_file(learner, "moon", NO_TAGS);
    struct model_answer known = learner_ask(learner, "moon");
    struct model_answer answer = learner_ask(learner, "rise");
    assert_int_equal(known.gap_count, answer.gap_count);
    assert_true(known.expected == answer.expected);
}

static void a_chance_is_a_share_of_one(void **state)
{
    struct entry entry;
    struct model_question question = draft_question(&entry);
    for (int tagged = 0; tagged < 2; tagged++) {
        question.tagged = tagged != 0;
        struct model_answer answer = learner_answer(*state, &question);
        for (size_t i = 0; i < answer.gap_count; i++) {
            assert_true(answer.gaps[i].chance >= 0.0 && answer.gaps[i].chance <= 1.0);
        }
    }
}

/* --- how many in all ----------------------------------------------------------------------------
 */

static double sum_of(const struct model_answer *answer)
{
    double sum = 0.0;
    for (size_t i = 0; i < answer->gap_count; i++) {
        sum += answer->gaps[i].chance;
    }
    return sum;
}

static void the_expected_number_of_a_draft_is_the_sum_over_all_tags(void **state)
{
    struct model_answer answer = learner_ask(*state, DRAFT);
    assert_int_equal(answer.gap_count, STREAM_TAGS);
    assert_near(answer.expected, sum_of(&answer), 1e-9);
}

/* Tags used 64 times or more share a propensity with their neighbours in the census: 2 %. */
static void the_expected_number_of_a_filed_item_is_the_sum_over_all_tags(void **state)
{
    struct entry entry;
    struct model_question question = draft_question(&entry);
    question.tagged = true;
    struct model_answer answer = learner_answer(*state, &question);
    assert_int_equal(answer.gap_count, STREAM_TAGS);
    assert_near(answer.expected / sum_of(&answer), 1.0, 0.02);
}

/* No tag of a short stream reaches 64 uses: then the sum is exact. */
static void with_few_uses_the_expected_number_is_exact(void **state)
{
    struct stream stream = {.random = {5}, .tag_count = STREAM_TAGS, .given_share = 0.8};
    struct entry entry;
    uint32_t truth[ENTRY_TAGS];
    for (int i = 0; i < 150; i++) {
        (void)stream_next(&stream, &entry, truth);
        learner_change(*state, &entry, NULL);
    }
    for (int i = 0; i < 30; i++) {
        (void)stream_next(&stream, &entry, truth);
        struct model_question question = entry_question(&entry);
        question.tagged = true;
        question.given = entry.tags;
        question.given_count = entry.tag_count;
        question.excluded = (const uint32_t[]){1, 17};
        question.excluded_count = 2;
        struct model_answer answer = learner_answer(*state, &question);
        assert_true(answer.gap_count >= 30);
        assert_near(answer.expected, sum_of(&answer), 1e-9);
    }
}

static void the_expected_number_is_over_all_tags_however_few_are_listed(void **state)
{
    struct entry entry;
    struct model_question question = draft_question(&entry);
    double expected = learner_answer(*state, &question).expected;
    question.most = 1;
    question.floor = 0.9;
    assert_true(learner_answer(*state, &question).expected == expected);
}

static void what_is_excluded_is_not_expected(void **state)
{
    struct entry entry;
    struct model_question question = draft_question(&entry);
    struct model_answer all = learner_answer(*state, &question);
    double expected = all.expected - find_gap(&all, 3)->chance - find_gap(&all, 39)->chance;
    question.excluded = (const uint32_t[]){3, 39};
    question.excluded_count = 2;
    assert_near(learner_answer(*state, &question).expected, expected, 1e-9);
}

int main(void)
{
#define new_test(name) cmocka_unit_test_setup_teardown(name, learner_set_up, learner_tear_down)
#define stream_test(name) cmocka_unit_test_setup_teardown(name, stream_set_up, learner_tear_down)
    const struct CMUnitTest tests[] = {
        new_test(an_empty_model_proposes_nothing_and_says_that_it_is_early),
        new_test(a_question_without_a_word_is_answered),
        new_test(one_entry_is_enough_to_propose_its_tag),
        new_test(with_two_hundred_given_pairs_it_is_early_no_more),
        stream_test(the_tags_that_the_words_speak_for_come_first),
        stream_test(the_answer_comes_by_falling_chance),
        stream_test(every_tag_is_listed_once_when_there_is_no_floor),
        stream_test(what_is_given_or_excluded_is_never_proposed),
        stream_test(what_one_question_excludes_the_next_may_propose),
        stream_test(a_given_tag_that_nobody_knows_is_passed_over),
        stream_test(no_more_than_are_asked_for_are_listed),
        stream_test(the_first_of_all_are_listed_however_few_are_asked_for),
        stream_test(nothing_below_the_floor_is_listed),
        stream_test(asking_changes_nothing),
        stream_test(an_answer_follows_what_was_learned_since),
        new_test(a_draft_has_the_scores_that_it_is_filed_with),
        new_test(a_scratch_may_be_used_with_one_model_after_the_other),
        new_test(a_filed_item_s_chances_are_those_of_a_missing_tag),
        new_test(a_document_without_a_known_word_gets_the_commonest_tags),
        new_test(a_word_that_only_untagged_items_hold_counts_as_unknown),
        stream_test(a_chance_is_a_share_of_one),
        stream_test(the_expected_number_of_a_draft_is_the_sum_over_all_tags),
        stream_test(the_expected_number_of_a_filed_item_is_the_sum_over_all_tags),
        new_test(with_few_uses_the_expected_number_is_exact),
        stream_test(the_expected_number_is_over_all_tags_however_few_are_listed),
        stream_test(what_is_excluded_is_not_expected),
    };
    return cmocka_run_group_tests_name("asking", tests, NULL, NULL);
}
