/* Which words of an item speak for a tag that it lacks, and how strongly. */
#include "daemon/learner/model.h"

#include "tests/unit/model_fixture.h"

static void the_words_are_those_that_taught_the_tag(void **state)
{
    const struct learner *learner = *state;
    struct entry entry;
    for (int i = 0; i < 10; i++) { /* from the tenth on the bias may have a part */
        learner_file(learner, "fog", TAGS(0));
        learner_file(learner, "bell", TAGS(1));
    }
    entry_set(&entry, "moon bell fog", NO_TAGS);
    struct model_question question = entry_question(&entry);
    question.why = true;
    struct model_answer answer = learner_answer(learner, &question);
    const struct model_gap *fog = find_gap(&answer, 0);
    const struct model_gap *bell = find_gap(&answer, 1);
    assert_int_equal(fog->word_count, 1);
    assert_int_equal(fog->words[0].feature, 2);
    assert_int_equal(bell->word_count, 1);
    assert_int_equal(bell->words[0].feature, 1);
    assert_true(fog->words[0].share > 0.0 && fog->words[0].share < 1.0); /* the bias has a part */
}

/* Its bias is held at 0. */
static void for_a_tag_just_opened_its_words_speak_alone(void **state)
{
    const struct learner *learner = *state;
    struct entry entry;
    learner_file(learner, "fog", TAGS(0));
    entry_set(&entry, "moon fog", NO_TAGS);
    struct model_question question = entry_question(&entry);
    question.why = true;
    struct model_answer answer = learner_answer(learner, &question);
    assert_int_equal(answer.gaps[0].word_count, 1);
    assert_near(answer.gaps[0].words[0].share, 1.0, 0.0);
}

static void the_shares_of_the_words_fall_and_sum_to_one_at_most(void **state)
{
    struct entry entry;
    struct model_question question = draft_question(&entry);
    question.why = true;
    struct model_answer answer = learner_answer(*state, &question);
    assert_true(answer.gaps[0].word_count >= 2);
    for (size_t i = 0; i < answer.gap_count; i++) {
        const struct model_gap *gap = &answer.gaps[i];
        double sum = 0.0;
        assert_true(gap->word_count <= MODEL_WHY_WORDS);
        for (size_t k = 0; k < gap->word_count; k++) {
            assert_true(gap->words[k].feature < entry.feature_count);
            assert_true(gap->words[k].share > 0.0);
            assert_true(k == 0 || gap->words[k].share <= gap->words[k - 1].share);
            sum += gap->words[k].share;
        }
        assert_true(sum <= 1.0 + 1e-6);
    }
}

/* Ten words, the later ones learned more often, and entries without the tag to keep its bias low.
 */
static void learn_ten_words(const struct learner *learner)
{
    static const char *const words[] = {"a", "b", "c", "d", "e", "f", "g", "h", "i", "j"};
    for (int i = 0; i < 20; i++) {
        for (int k = i / 2; k < 10; k++) {
            learner_file(learner, words[k], TAGS(0));
            learner_file(learner, "z", NO_TAGS);
        }
    }
}

/* The terms told for the best tag, one letter each, by falling share; returns their shares' sum. */
static double terms_told(const struct learner *learner, const char *words, char *ret_terms)
{
    struct entry entry;
    entry_set(&entry, words, NO_TAGS);
    struct model_question question = entry_question(&entry);
    question.why = true;
    struct model_answer answer = learner_answer(learner, &question);
    const struct model_gap *gap = &answer.gaps[0];
    double sum = 0.0;
    for (size_t k = 0; k < gap->word_count; k++) {
        ret_terms[k] = entry.features[gap->words[k].feature].term[0];
        sum += gap->words[k].share;
    }
    ret_terms[gap->word_count] = '\0';
    return sum;
}

static void of_many_words_the_strongest_eight_are_told(void **state)
{
    const struct learner *learner = *state;
    char terms[MODEL_WHY_WORDS + 1];
    char other_terms[MODEL_WHY_WORDS + 1];
    learn_ten_words(learner);
    double sum = terms_told(learner, "a b c d e f g h i j", terms);
    (void)terms_told(learner, "j i h g f e d c b a", other_terms);
    assert_int_equal(strlen(terms), MODEL_WHY_WORDS);
    assert_string_equal(terms, other_terms); /* wherever in the item they stand */
    assert_true(sum > 0.5 && sum < 1.0);     /* two words and the bias are left out */
}

/*
 * By hand, of an entry filed with "fog moon" among twenty of "fog": "fog" is held by all 21, so its
 * idf is ln 2 = .693147; "moon" by this one alone, ln 22 = 3.091042, of which a half counts,
 * 1.545521, since no other item shares it: x = .693147/√(.693147² + 1.545521²) = .409217. Of the
 * positive part w·x + b the share is s, so that x is the ratio of s/(1 - s) with "moon" and
 * without; with so many items b is above 0.
 */
static void a_word_that_no_other_item_holds_weighs_half(void **state)
{
    const struct learner *learner = *state;
    struct entry filed;
    double odds[2];
    entry_set(&filed, "fog moon", NO_TAGS);
    learner_change(learner, &filed, NULL);
    for (int i = 0; i < 20; i++) {
        learner_file(learner, "fog", TAGS(0));
    }
    struct model_question question = filed_question(&filed);
    question.why = true;
    for (size_t words = 1; words <= 2; words++) {
        question.feature_count = words;
        double share = learner_answer(learner, &question).gaps[0].words[0].share;
        odds[words - 1] = share / (1.0 - share);
    }
    assert_near(odds[1] / odds[0], 0.409217, 1e-5);
}

static void words_are_told_when_they_are_asked_for_alone(void **state)
{
    struct model_answer answer = learner_ask(*state, DRAFT);
    for (size_t i = 0; i < answer.gap_count; i++) {
        assert_int_equal(answer.gaps[i].word_count, 0);
    }
}

static void a_word_of_every_entry_says_less_than_one_of_few(void **state)
{
    struct entry entry;
    struct model_question question = draft_question(&entry);
    question.why = true;
    struct model_answer answer = learner_answer(*state, &question);
    const struct model_gap *gap = find_gap(&answer, 3);
    const char *term = entry.features[gap->words[0].feature].term;
    assert_memory_equal(term, "t3q", 3);
}

static void a_document_without_a_known_word_has_no_reasons(void **state)
{
    struct entry entry;
    entry_set(&entry, "moon rise", NO_TAGS);
    struct model_question question = entry_question(&entry);
    question.why = true;
    struct model_answer answer = learner_answer(*state, &question);
    assert_true(answer.gap_count > 0);
    assert_int_equal(answer.gaps[0].word_count, 0);
}

int main(void)
{
#define new_test(name) cmocka_unit_test_setup_teardown(name, learner_set_up, learner_tear_down)
#define stream_test(name) cmocka_unit_test_setup_teardown(name, stream_set_up, learner_tear_down)
    const struct CMUnitTest tests[] = {
        new_test(the_words_are_those_that_taught_the_tag),
        new_test(for_a_tag_just_opened_its_words_speak_alone),
        stream_test(the_shares_of_the_words_fall_and_sum_to_one_at_most),
        new_test(of_many_words_the_strongest_eight_are_told),
        new_test(a_word_that_no_other_item_holds_weighs_half),
        stream_test(words_are_told_when_they_are_asked_for_alone),
        stream_test(a_word_of_every_entry_says_less_than_one_of_few),
        stream_test(a_document_without_a_known_word_has_no_reasons),
    };
    return cmocka_run_group_tests_name("reasons", tests, NULL, NULL);
}
