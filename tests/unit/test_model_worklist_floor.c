/*
 * An item that has spoken against a tag so often that the tag's score is down at the floor, where
 * tags are not looked at: without the item's own share the tag may still be missing, and is a gap.
 */
#include "daemon/learner/model.h"

#include "tests/unit/model_fixture.h"

/* What floats lose between two ways to the same score. */
static const double ROUNDING = 1e-5;

enum {
    OTHERS = 3, /* the tags that `last` has not: 0, 1 and 3 */
    REVISIONS = 40
};

/* Both know the same entries of two words; only the learner has one more, revised again and again
 * with the same words and the same one tag, so that it speaks against the others. */
struct lowered {
    struct learner learner;
    struct learner twin; /* has never seen `last` */
    struct entry last;   /* has tag 2 */
};

static int set_up(void **state)
{
    static struct lowered lowered;
    const struct model_settings settings = learner_settings();
    struct entry entry;
    learner_renew(&lowered.learner, &settings);
    learner_renew(&lowered.twin, &settings);
    for (uint32_t i = 0; i < 30; i++) {
        const uint32_t tags[] = {i % 3, 3};
        entry_set(&entry, "fog bell", tags, i % 2 + 1);
        learner_change(&lowered.learner, &entry, NULL);
        learner_change(&lowered.twin, &entry, NULL);
    }
    entry_set(&lowered.last, "fog bell", TAGS(2));
    learner_change(&lowered.learner, &lowered.last, NULL);
    for (int i = 0; i < REVISIONS; i++) {
        const struct entry before = lowered.last;
        entry_set(&lowered.last, "fog bell", TAGS(2));
        learner_change(&lowered.learner, &lowered.last, &before);
    }
    *state = &lowered;
    return 0;
}

static int tear_down(void **state)
{
    struct lowered *lowered = *state;
    learner_free(&lowered->learner);
    learner_free(&lowered->twin);
    return 0;
}

/* Each of the other tags is a gap with the twin's score, and at the floor as it is. */
static void assert_gaps_of_twin(const struct lowered *lowered)
{
    const struct worklist_entry listed = learner_listed(&lowered->learner, &lowered->last);
    double rounding = (REVISIONS + 1) * rounding_of_words(2);
    assert_int_equal(listed.gap_count, OTHERS);
    for (uint32_t i = 0; i < listed.gap_count; i++) {
        const struct worklist_gap *gap = &listed.gaps[i];
        double now = learner_score(&lowered->learner, "fog bell", gap->tag);
        double without = learner_score(&lowered->twin, "fog bell", gap->tag);
        assert_int_not_equal(gap->tag, 2);
        assert_true(now <= (double)WEIGHTS_FLOOR_SCORE);
        assert_true((double)gap->score > (double)WEIGHTS_FLOOR_SCORE + 0.2);
        assert_near((double)gap->score, without, rounding);
    }
}

static void revised_again_the_entry_keeps_its_gaps(void **state)
{
    assert_gaps_of_twin(*state);
}

static void scored_again_the_entry_keeps_its_gaps(void **state)
{
    const struct lowered *lowered = *state;
    learner_rescore(&lowered->learner, &lowered->last);
    assert_gaps_of_twin(lowered);
}

static struct model_answer ask_of_last(const struct lowered *lowered, double floor)
{
    struct model_question question = filed_question(&lowered->last);
    question.floor = floor;
    return learner_answer(&lowered->learner, &question);
}

/* Above a chance that no tag at the floor has. */
static void a_question_about_the_item_finds_the_same_gaps(void **state)
{
    const struct lowered *lowered = *state;
    learner_rescore(&lowered->learner, &lowered->last);
    const struct worklist_entry listed = learner_listed(&lowered->learner, &lowered->last);
    struct model_answer answer = ask_of_last(lowered, 0.01);
    assert_int_equal(answer.gap_count, OTHERS);
    for (size_t i = 0; i < answer.gap_count; i++) {
        const struct worklist_gap *gap = listed_gap(&listed, answer.gaps[i].tag);
        assert_non_null(gap);
        assert_near(answer.gaps[i].chance, model_gap_chance(lowered->learner.model, &listed, gap),
                    ROUNDING);
        assert_true(answer.gaps[i].score <= (double)WEIGHTS_FLOOR_SCORE); /* shown as it is */
    }
}

static void each_tag_is_counted_once(void **state)
{
    const struct lowered *lowered = *state;
    struct model_answer answer = ask_of_last(lowered, 0.0);
    double sum = 0.0;
    assert_int_equal(answer.gap_count, OTHERS);
    for (size_t i = 0; i < answer.gap_count; i++) {
        sum += answer.gaps[i].chance;
    }
    assert_near(answer.expected, sum, 1e-9);
}

/* A draft has no own share: what stands in the way of one item does not for the next. */
static void the_next_question_knows_nothing_of_it(void **state)
{
    const struct lowered *lowered = *state;
    struct model_answer before = learner_ask(&lowered->learner, "fog bell");
    double expected = before.expected;
    double chance = find_gap(&before, 3)->chance;
    struct model_answer filed = ask_of_last(lowered, 0.0);
    assert_true(find_gap(&filed, 3)->chance > chance);
    struct model_answer after = learner_ask(&lowered->learner, "fog bell");
    assert_true(after.expected == expected);
    assert_true(find_gap(&after, 3)->chance == chance);
}

int main(void)
{
#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)
    const struct CMUnitTest tests[] = {
        TEST(revised_again_the_entry_keeps_its_gaps),
        TEST(scored_again_the_entry_keeps_its_gaps),
        TEST(a_question_about_the_item_finds_the_same_gaps),
        TEST(each_tag_is_counted_once),
        TEST(the_next_question_knows_nothing_of_it),
    };
    return cmocka_run_group_tests_name("entries at the floor", tests, NULL, NULL);
}
