/* What rulings and checks say of the chances: whether those shown held, and as evidence for others.
 */
#include "daemon/learner/model.h"

#include "tests/unit/examine_fixture.h"

/* --- what a ruling says of the chances ----------------------------------------------------------
 */

/* The chance that is shown for a gap of the entry as it was filed. */
static double shown_chance(const struct examining *examining, uint32_t tag)
{
    struct model_question question = filed_question(&examining->filed);
    struct model_answer answer = learner_answer(&examining->learner, &question);
    return find_gap(&answer, tag)->chance;
}

static void a_ruling_is_rated_once_by_the_chance_that_was_shown(void **state)
{
    struct examining *examining = *state;
    double chance = shown_chance(examining, 3);
    entry_find_tag(&examining->ruled, 3);
    examine(examining);
    struct learner_rated sum = learner_rated(&examining->learner);
    assert_int_equal(sum.shown, 1);
    assert_int_equal(sum.confirmed, 1);
    assert_near(sum.chances, chance, 1e-5);
}

static void a_denial_is_rated_as_not_confirmed(void **state)
{
    struct examining *examining = *state;
    double chance = shown_chance(examining, 9);
    entry_deny_tag(&examining->ruled, 9);
    examine(examining);
    struct learner_rated sum = learner_rated(&examining->learner);
    assert_int_equal(sum.shown, 1);
    assert_int_equal(sum.confirmed, 0);
    assert_near(sum.chances, chance, 1e-5);
}

/* The other tag's ruling comes with what was known before. */
static void what_was_known_already_is_not_rated_again(void **state)
{
    struct examining *examining = *state;
    struct entry next;
    entry_find_tag(&examining->ruled, 3);
    examine(examining);
    struct learner_rated first = learner_rated(&examining->learner);
    entry_follow(&next, &examining->ruled);
    entry_deny_tag(&next, 9);
    learner_change(&examining->learner, &next, &examining->ruled);
    struct learner_rated second = learner_rated(&examining->learner);
    assert_int_equal(second.shown, first.shown + 1);
    assert_int_equal(second.confirmed, first.confirmed);
}

/* The trial says that the tag's propensity is lower; the chance that was shown did not know it. Of
 * so few items that the propensity is the curve's. */
static void the_ruling_s_own_trial_has_no_say_in_its_chance(void **state)
{
    struct examining *examining = *state;
    const struct model_settings settings = learner_settings();
    learner_renew(&examining->learner, &settings);
    learner_file(&examining->learner, "bell", TAGS(1));
    learner_file(&examining->learner, "fog", TAGS(0));
    learner_file(&examining->learner, "quay", TAGS(1));
    learner_file(&examining->learner, "gale", TAGS(1));
    entry_set(&examining->filed, "bell fog quay gale", TAGS(1));
    learner_change(&examining->learner, &examining->filed, NULL);
    entry_follow(&examining->ruled, &examining->filed);
    double chance = shown_chance(examining, 0);
    assert_true(chance > 0.06 && chance < 0.2); /* steep: by its propensity, too */
    entry_find_tag(&examining->ruled, 0);
    entry_try_tag(&examining->ruled, 0, false);
    examine(examining);
    assert_near(learner_rated(&examining->learner).chances, chance, 1e-6);
}

/* It can be asked for, but nothing has proposed it. */
static void what_was_not_likely_enough_to_be_proposed_is_not_rated(void **state)
{
    struct examining *examining = *state;
    double chance = shown_chance(examining, 38);
    assert_true(chance > 0.0 && chance < 0.05);
    entry_deny_tag(&examining->ruled, 38);
    examine(examining);
    assert_int_equal(learner_rated(&examining->learner).shown, 0);
    assert_added(examining, (struct calibrators_cell){.ruled = 1.0});
}

static void a_ruling_on_a_tag_that_it_has_opened_is_not_rated(void **state)
{
    struct examining *examining = *state;
    entry_find_tag(&examining->ruled, STREAM_TAGS);
    examine(examining);
    assert_int_equal(learner_rated(&examining->learner).shown, 0);
    assert_added(examining, (struct calibrators_cell){.ruled = 0.0});
}

/* --- rulings as evidence ------------------------------------------------------------------------
 */

static size_t bin_of(float score)
{
    return 1 + (size_t)(((double)score - CALIBRATORS_FLOOR_SCORE) / 0.02);
}

/* Other items have moved the score since; the pair lies where it was counted. */
static void a_ruling_stands_beside_the_pair_that_was_counted(void **state)
{
    struct examining *examining = *state;
    for (int i = 0; i < 20; i++) {
        learner_file(&examining->learner, "log t3q0 n7q0", TAGS(3));
    }
    learner_rescore(&examining->learner, &examining->filed);
    const struct worklist_entry listed = learner_listed(&examining->learner, &examining->filed);
    const struct worklist_pair pair = *listed_pair(&listed, 3);
    assert_int_not_equal(bin_of(listed_gap(&listed, 3)->score), bin_of(pair.counted));
    entry_find_tag(&examining->ruled, 3);
    examine(examining);
    assert_added(examining, (struct calibrators_cell){.ruled = 1.0, .ruled_true = 1.0});
    assert_near(memory_evidence(examining->after, bin_of(pair.counted)).ruled, 1.0, 1e-9);
}

static void a_ruling_moves_the_chances_at_once(void **state)
{
    struct examining *examining = *state;
    entry_deny_tag(&examining->ruled, 9);
    examine(examining);
    assert_memory_not_equal(examining->after->figures[MODEL_FIGURES_CURVE],
                            examining->before->figures[MODEL_FIGURES_CURVE],
                            sizeof examining->after->figures[MODEL_FIGURES_CURVE]);
}

static void a_denial_is_a_ruling_that_is_not_true(void **state)
{
    struct examining *examining = *state;
    entry_deny_tag(&examining->ruled, 9);
    examine(examining);
    assert_added(examining, (struct calibrators_cell){.ruled = 1.0});
}

static void a_given_tag_that_was_taken_off_is_a_known_mistake(void **state)
{
    struct examining *examining = *state;
    examining->ruled.tag_count = 0;
    entry_deny_tag(&examining->ruled, 20);
    examine(examining);
    assert_added(examining, (struct calibrators_cell){.pairs = -1.0, .given = -1.0, .known = 1.0});
    assert_int_equal(learner_rated(&examining->learner).shown, 0); /* nothing was shown */
}

static void a_ruling_that_is_taken_back_is_no_second_ruling(void **state)
{
    struct examining *examining = *state;
    struct entry next;
    entry_deny_tag(&examining->ruled, 9);
    learner_change(&examining->learner, &examining->ruled, &examining->filed);
    memory_take(examining->before, examining->learner.model);
    entry_follow(&next, &examining->ruled);
    next.known_not_count = 0;
    entry_find_tag(&next, 9);
    learner_change(&examining->learner, &next, &examining->ruled);
    memory_take(examining->after, examining->learner.model);
    assert_added(examining, (struct calibrators_cell){.ruled = 0.0});
    assert_int_equal(learner_rated(&examining->learner).shown, 1);
}

/* --- checks -------------------------------------------------------------------------------------
 */

/* Every tag of the stream is in use; one is on the entry, one of the others is found. */
static void a_check_rules_on_every_gap(void **state)
{
    struct examining *examining = *state;
    entry_find_tag(&examining->ruled, 3);
    examining->ruled.checked_below = STREAM_TAGS;
    examine(examining);
    assert_added(examining,
                 (struct calibrators_cell){.ruled = STREAM_TAGS - 1.0, .ruled_true = 1.0});
    assert_int_equal(learner_rated(&examining->learner).shown, 0); /* nothing was proposed */
}

static void a_check_rules_on_no_gap_twice(void **state)
{
    struct examining *examining = *state;
    struct entry next;
    entry_deny_tag(&examining->ruled, 9);
    learner_change(&examining->learner, &examining->ruled, &examining->filed);
    memory_take(examining->before, examining->learner.model);
    entry_follow(&next, &examining->ruled);
    next.checked_below = STREAM_TAGS;
    learner_change(&examining->learner, &next, &examining->ruled);
    memory_take(examining->after, examining->learner.model);
    assert_added(examining, (struct calibrators_cell){.ruled = STREAM_TAGS - 2.0});
    entry_follow(&examining->ruled, &next);
    entry_deny_tag(&examining->ruled, 5); /* which the check has said already */
    learner_change(&examining->learner, &examining->ruled, &next);
    memory_take(examining->before, examining->learner.model);
    assert_near(memory_evidence(examining->before, CALIBRATORS_BINS).ruled,
                memory_evidence(examining->after, CALIBRATORS_BINS).ruled, 1e-9);
}

static void a_check_takes_the_rest_for_counted_where_it_was(void **state)
{
    struct examining *examining = *state;
    examining->ruled.checked_below = STREAM_TAGS;
    examine(examining);
    for (size_t bin = 0; bin < CALIBRATORS_BINS; bin++) {
        struct calibrators_cell cell = memory_evidence(examining->after, bin);
        assert_true(cell.ruled <= cell.pairs - cell.given + 1e-9);
    }
    assert_true(memory_evidence(examining->after, 0).ruled > 20.0); /* tags of other words */
}

/* The record of the filing is gone. Somebody went through tags 0 to 2, and 0 is on the item; 3 and
 * 4 were opened later. */
static void a_check_counts_again_when_all_is_learned_again(void **state)
{
    struct examining *examining = *state;
    struct model_settings settings = learner_settings();
    settings.evidence_half_life_items = 1e18;
    learner_renew(&examining->learner, &settings);
    learner_file(&examining->learner, "fog", TAGS(0, 1, 2));
    learner_file(&examining->learner, "bell", TAGS(3, 4));
    memory_take(examining->before, examining->learner.model);
    entry_set(&examining->filed, "fog bell", TAGS(0));
    examining->filed.same_words = true;
    examining->filed.checked_below = 3;
    learner_change(&examining->learner, &examining->filed, NULL);
    memory_take(examining->after, examining->learner.model);
    assert_added(examining, (struct calibrators_cell){.pairs = 5.0, .given = 1.0, .ruled = 2.0});
}

/* After one item more, of a half-life of one. */
static void a_ruling_weighs_what_its_pair_still_weighs(void **state)
{
    struct examining *examining = *state;
    struct model_settings settings = learner_settings();
    struct entry first;
    settings.evidence_half_life_items = 1.0;
    learner_renew(&examining->learner, &settings);
    learner_file(&examining->learner, "fog", TAGS(0));
    entry_set(&first, "fog", NO_TAGS);
    learner_change(&examining->learner, &first, NULL);
    learner_file(&examining->learner, "fog", TAGS(0));
    entry_follow(&examining->ruled, &first);
    entry_find_tag(&examining->ruled, 0);
    learner_change(&examining->learner, &examining->ruled, &first);
    memory_take(examining->after, examining->learner.model);
    assert_near(memory_evidence(examining->after, CALIBRATORS_BINS).ruled, 0.5, 1e-9);
}

int main(void)
{
#define TEST(name) cmocka_unit_test_setup_teardown(name, examining_set_up, examining_tear_down)
    const struct CMUnitTest tests[] = {
        TEST(a_ruling_is_rated_once_by_the_chance_that_was_shown),
        TEST(a_denial_is_rated_as_not_confirmed),
        TEST(what_was_known_already_is_not_rated_again),
        TEST(the_ruling_s_own_trial_has_no_say_in_its_chance),
        TEST(what_was_not_likely_enough_to_be_proposed_is_not_rated),
        TEST(a_ruling_on_a_tag_that_it_has_opened_is_not_rated),
        TEST(a_ruling_stands_beside_the_pair_that_was_counted),
        TEST(a_ruling_moves_the_chances_at_once),
        TEST(a_denial_is_a_ruling_that_is_not_true),
        TEST(a_given_tag_that_was_taken_off_is_a_known_mistake),
        TEST(a_ruling_that_is_taken_back_is_no_second_ruling),
        TEST(a_check_rules_on_every_gap),
        TEST(a_check_rules_on_no_gap_twice),
        TEST(a_check_takes_the_rest_for_counted_where_it_was),
        TEST(a_check_counts_again_when_all_is_learned_again),
        TEST(a_ruling_weighs_what_its_pair_still_weighs),
    };
    return cmocka_run_group_tests_name("rulings and checks", tests, NULL, NULL);
}
