/* Tags that have just been opened, and tags that no item has any more. */
#include "daemon/learner/model.h"

#include "daemon/learner/calibrators.h"
#include "tests/unit/model_fixture.h"

/* --- tags just opened ---------------------------------------------------------------------------
 */

enum {
    ORDINARY = 300,
    OPENED = STREAM_TAGS /* and the number after it */
};

/* The ordinary entries, the same each time; `each` sees one after the other. */
static void walk_ordinary(const struct learner *learner, double *sums,
                          void (*each)(const struct learner *, const struct entry *, double *))
{
    struct stream stream = {.random = {6}, .tag_count = STREAM_TAGS, .given_share = 0.8};
    struct entry entry;
    uint32_t truth[ENTRY_TAGS];
    for (int i = 0; i < ORDINARY; i++) {
        (void)stream_next(&stream, &entry, truth);
        each(learner, &entry, sums);
    }
}

static void file_entry(const struct learner *learner, const struct entry *entry, double *sums)
{
    (void)sums;
    learner_change(learner, entry, NULL);
}

static void add_expected(const struct learner *learner, const struct entry *entry, double *sum)
{
    struct model_question question = filed_question(entry);
    *sum += learner_answer(learner, &question).expected;
}

/* The two opened tags lie at the floor, as tags do that share nothing with the entry. */
static void assert_not_proposed(const struct learner *learner, const struct entry *entry,
                                double *most)
{
    struct model_question question = filed_question(entry);
    struct model_answer answer = learner_answer(learner, &question);
    for (uint32_t tag = OPENED; tag < OPENED + 2; tag++) {
        const struct model_gap *gap = find_gap(&answer, tag);
        assert_non_null(gap);
        assert_true(gap->score <= CALIBRATORS_FLOOR_SCORE);
        *most = fmax(*most, gap->chance);
    }
}

static void a_tag_just_opened_is_not_proposed_to_an_item_that_shares_no_word_with_it(void **state)
{
    const struct learner *learner = *state;
    double before = 0.0;
    double after = 0.0;
    double most = 0.0;
    walk_ordinary(learner, NULL, file_entry);
    walk_ordinary(learner, &before, add_expected);
    learner_file(learner, "wreck salvage", TAGS(OPENED, OPENED + 1));
    walk_ordinary(learner, &most, assert_not_proposed);
    walk_ordinary(learner, &after, add_expected);
    assert_true(most < 0.01);
    assert_near(after / before, 1.0, 0.02);
}

static void a_tag_just_opened_is_proposed_where_its_words_are(void **state)
{
    const struct learner *learner = *state;
    walk_ordinary(learner, NULL, file_entry);
    learner_file(learner, "wreck salvage", TAGS(OPENED));
    struct model_answer answer = learner_ask(learner, "wreck n1q0");
    assert_int_equal(answer.gaps[0].tag, OPENED);
}

/* --- tags that no item has any more -------------------------------------------------------------
 */

/* The entries of tag 1: enough of them for a bias above 0, and of words that other entries hold. */
static const char *lost_words(int i)
{
    return i < 10 ? "fog" : "bell";
}

/* Tag 1 has had twelve entries, so that it has weights and a bias, and has none any more; tag 0 has
 * one. */
static void lose_a_tag(const struct learner *learner, bool by_revision)
{
    static struct entry old[12];
    struct entry revised;
    learner_file(learner, "lamp bell fog", TAGS(0));
    for (int i = 0; i < 12; i++) {
        entry_set(&old[i], lost_words(i), TAGS(1));
        learner_change(learner, &old[i], NULL);
    }
    assert_true(learner_score(learner, "lamp", 1) > CALIBRATORS_FLOOR_SCORE); /* by its bias */
    for (int i = 0; i < 12; i++) {
        entry_set(&revised, lost_words(i), NO_TAGS);
        learner_change(learner, by_revision ? &revised : NULL, &old[i]);
    }
}

/* With a known word and without, as a draft and filed, whether or not the tag is barred: floor 0.
 */
static void assert_lost(const struct learner *learner)
{
    static const char *const words[] = {"fog bell", "lamp", "moon rise", ""};
    for (size_t i = 0; i < 16; i++) {
        struct entry entry;
        entry_set(&entry, words[i / 4], NO_TAGS);
        struct model_question question = entry_question(&entry);
        question.tagged = i % 2 != 0;
        question.excluded = (const uint32_t[]){1};
        question.excluded_count = i % 4 / 2;
        struct model_answer answer = learner_answer(learner, &question);
        assert_int_equal(answer.gap_count, 1);
        assert_int_equal(answer.gaps[0].tag, 0);
        assert_near(answer.expected, answer.gaps[0].chance, 1e-11);
    }
}

static void a_tag_whose_items_were_all_revised_is_neither_proposed_nor_expected(void **state)
{
    lose_a_tag(*state, true);
    assert_lost(*state);
}

static void a_tag_whose_items_were_all_withdrawn_is_neither_proposed_nor_expected(void **state)
{
    lose_a_tag(*state, false);
    assert_lost(*state);
}

static void when_every_tag_has_lost_its_items_nothing_is_proposed(void **state)
{
    const struct learner *learner = *state;
    struct entry fog;
    entry_set(&fog, "fog bell", TAGS(0, 3));
    learner_change(learner, &fog, NULL);
    learner_file(learner, "fog bell", NO_TAGS);
    learner_change(learner, NULL, &fog);
    struct model_answer answer = learner_ask(learner, "fog bell");
    assert_int_equal(answer.gap_count, 0);
    assert_near(answer.expected, 0.0, 0.0);
}

static void a_tag_that_comes_back_is_proposed_again(void **state)
{
    const struct learner *learner = *state;
    lose_a_tag(learner, true);
    learner_file(learner, "fog", TAGS(1));
    struct model_answer answer = learner_ask(learner, "fog");
    assert_int_equal(answer.gap_count, 2);
    assert_non_null(find_gap(&answer, 1));
    assert_near(answer.expected, answer.gaps[0].chance + answer.gaps[1].chance, 1e-11);
}

int main(void)
{
#define new_test(name) cmocka_unit_test_setup_teardown(name, learner_set_up, learner_tear_down)
    const struct CMUnitTest tests[] = {
        new_test(a_tag_just_opened_is_not_proposed_to_an_item_that_shares_no_word_with_it),
        new_test(a_tag_just_opened_is_proposed_where_its_words_are),
        new_test(a_tag_whose_items_were_all_revised_is_neither_proposed_nor_expected),
        new_test(a_tag_whose_items_were_all_withdrawn_is_neither_proposed_nor_expected),
        new_test(when_every_tag_has_lost_its_items_nothing_is_proposed),
        new_test(a_tag_that_comes_back_is_proposed_again),
    };
    return cmocka_run_group_tests_name("tags without items", tests, NULL, NULL);
}
