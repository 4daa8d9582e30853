/*
 * What one example does to the weights: AdaGrad (Duchi et al. 2011) with the importance-aware step.
 *
 * By hand, squared hinge, one word of x = 1, a tag never learned that ten items have: s = -1,
 * slope = -2·(1 + 1) = -4. The word's accumulator becomes 4² = 16 and its rate .5/√(.1 + 16) =
 * .124611. The bias is a feature of value .5: its accumulator becomes (4·.5)² = 4, its rate
 * .5/√(.1 + 4) = .246932, and .5² of that is .061733. D = .124611 + .061733 = .186344,
 * α = 2·(1 - e^(-2·.186344))/.186344 = 3.339198; the weight becomes α·.124611 = .416101 and the
 * bias α·.061733 = .206139.
 *
 * What is learned is a weight rounded up or down to a step of 1/2048 (FIXTURE_ROUNDED); its rate is
 * that of the accumulator before it was rounded, and a bias is not rounded at all.
 */
#include "daemon/learner/weights.h"

#include "tests/unit/near.h"
#include "tests/unit/weights_fixture.h"

static void the_first_example_by_hand(void **state)
{
    struct fixture *fixture = *state;
    fixture_learn_one(fixture, 0, 0, 1.0);
    struct weights_bias bias = fixture_bias(fixture, 0);
    assert_near((double)bias.value, 0.206139, 1e-5);
    assert_near((double)bias.accumulator, 4.0, 1e-6);
    assert_near(fixture_score_of(fixture, 0, 0), -1.0 + 0.206139 + 0.416101,
                FIXTURE_ROUNDED + 1e-5);
    assert_near(fixture_score_of(fixture, 5, 0), -1.0 + 0.206139, 1e-5);
}

/* The gradient of the accumulator is that of the loss without the factor. */
static void a_factor_lengthens_the_step_and_not_the_accumulator(void **state)
{
    struct fixture *fixture = *state;
    fixture_learn_one(fixture, 0, 0, 1.0);
    fixture_learn_one(fixture, 1, 1, 3.0);
    /* Tag 0 is a rival by its bias and no more. For tag 1 D is as before: the score rises by
     * 2·(1 - e^(-6·.186344)) = 1.346177 in all. */
    assert_near(fixture_score_of(fixture, 1, 1), 0.346177, FIXTURE_ROUNDED + 1e-5);
    assert_near((double)fixture_bias(fixture, 1).accumulator, 4.0, 1e-6);
}

static void no_factor_carries_a_score_beyond_one(void **state)
{
    struct fixture *fixture = *state;
    fixture_learn_one(fixture, 0, 0, 1e9);
    assert_near(fixture_score_of(fixture, 0, 0), 1.0, FIXTURE_ROUNDED + 1e-6);
}

static void a_pair_that_counts_for_nothing_changes_nothing(void **state)
{
    struct fixture *fixture = *state;
    fixture_learn_one(fixture, 0, 0, 0.0);
    assert_near(fixture_score_of(fixture, 0, 0), -1.0, 0.0);
    assert_int_equal(weights_postings(fixture->weights), 0);
}

/* The tag's count is what it was when it was given last. */
static void note_count(const struct fixture *fixture, uint32_t tag, uint32_t count)
{
    assert_int_equal(weights_restore_count(fixture->weights, tag, count), 0);
}

static void what_is_right_already_is_not_learned_again(void **state)
{
    struct fixture *fixture = *state;
    fixture_put(fixture, 0, (const uint32_t[]){0}, (const float[]){2.5F}, 1); /* s = 1.5 */
    note_count(fixture, 0, FIXTURE_COUNT);
    fixture_learn_one(fixture, 0, 0, 7.0);
    assert_near(fixture_score_of(fixture, 0, 0), 1.5, 0.0);
    assert_near((double)fixture_bias(fixture, 0).accumulator, 0.0, 0.0);
    assert_int_equal(weights_changed_tag_count(fixture->weights), 0);
}

static void a_given_tag_s_count_is_noted_even_where_it_is_right_already(void **state)
{
    struct fixture *fixture = *state;
    fixture_put(fixture, 0, (const uint32_t[]){0}, (const float[]){2.5F}, 1); /* s = 1.5 */
    note_count(fixture, 0, FIXTURE_COUNT - 1);
    fixture_learn_one(fixture, 0, 0, 7.0);
    assert_int_equal(weights_tag_count(fixture->weights, 0), FIXTURE_COUNT);
    assert_int_equal(fixture_changed_tag(fixture), 0);
    assert_near(fixture_score_of(fixture, 0, 0), 1.5, 0.0);
    assert_near((double)fixture_bias(fixture, 0).accumulator, 0.0, 0.0);
}

/* Rivals are counted by the items that have them. */
static void a_rival_s_count_is_left_alone(void **state)
{
    struct fixture *fixture = *state;
    fixture_put(fixture, 0, (const uint32_t[]){1}, (const float[]){0.5F}, 1); /* s = -.5 */
    note_count(fixture, 1, 7);
    fixture_learn_one(fixture, 0, 0, 1.0);
    assert_true(fixture_bias(fixture, 1).accumulator > 0.0F);
    assert_int_equal(weights_tag_count(fixture->weights, 1), 7);
}

/* Rounding never takes a weight back from where it was, nor further than a step beyond 1. */
static void the_same_example_again_comes_nearer_to_one(void **state)
{
    struct fixture *fixture = *state;
    double last = -1.0;
    for (int i = 0; i < 30; i++) {
        fixture_learn_one(fixture, 0, 0, 1.0);
        double score = fixture_score_of(fixture, 0, 0);
        assert_true(score >= last && score <= 1.0 + FIXTURE_ROUNDED);
        last = score;
    }
    assert_true(last > 0.9);
}

/* A longer part of x has the larger gradient and moves its weight further. */
static void the_word_that_weighs_more_in_the_item_speaks_louder(void **state)
{
    struct fixture *fixture = *state;
    const struct weights_feature x[] = {fixture_word(0, 0.96F), fixture_word(1, 0.28F)};
    const struct weights_given given = fixture_given(0, 1.0);
    float parts[2];
    fixture_learn(fixture, x, 2, &given, 1);
    fixture_score(fixture, x, 2);
    fixture_explain(fixture, x, 2, (const uint32_t[]){0}, 1, parts);
    assert_true(parts[0] > parts[1] && parts[1] > 0.0F);
    /* s rises by α·D: -1 + bias + both parts, and never by more. */
    assert_near(fixture_tag_score(fixture, 0),
                -1.0 + (double)fixture_bias(fixture, 0).value + (double)parts[0] + (double)parts[1],
                1e-6);
}

/* --- the bias of a tag that few items have ------------------------------------------------------
 */

/* Learns an item of one word, of a tag that `tag_count` items have by now. */
static void learn_of_count(struct fixture *fixture, uint32_t tag, uint32_t tag_count)
{
    const struct weights_feature x = fixture_word(0, 1.0F);
    const struct weights_given given = {.tag = tag, .tag_count = tag_count, .factors = {1.0}};
    fixture_learn(fixture, &x, 1, &given, 1);
}

/* The first example's weight is that of the example by hand. */
static void the_bias_of_a_new_tag_does_not_rise_above_zero(void **state)
{
    struct fixture *fixture = *state;
    learn_of_count(fixture, 0, 1);
    assert_near((double)fixture_bias(fixture, 0).value, 0.0, 0.0);
    assert_near(fixture_score_of(fixture, 0, 0), -1.0 + 0.416101, FIXTURE_ROUNDED + 1e-5);
    for (uint32_t count = 2; count < 10; count++) {
        learn_of_count(fixture, 0, count);
        assert_near((double)fixture_bias(fixture, 0).value, 0.0, 0.0);
    }
    (void)fixture_score_of(fixture, 5, 0);
    assert_false(weights_is_touched(fixture->scratch, 0));
}

static void from_the_tenth_item_on_a_tag_s_bias_may_rise_above_zero(void **state)
{
    struct fixture *fixture = *state;
    for (uint32_t count = 1; count <= 10; count++) {
        learn_of_count(fixture, 0, count);
    }
    double at_ten = (double)fixture_bias(fixture, 0).value;
    assert_true(at_ten > 0.0);
    learn_of_count(fixture, 0, 11);
    assert_true((double)fixture_bias(fixture, 0).value > at_ten);
}

/*
 * As by hand, but lower. From a bias of -.5, s = -1.5: slope -5, accumulators 25 and 6.25, rates
 * .099801 and .25·.198419 = .049605, D = .149405, α = 2.5·(1 - e^(-2·.149405))/.149405 = 4.322138:
 * the bias rises by α·.049605 = .214399. From -.1 it would rise by about as much, to above 0.
 */
static void a_new_tag_s_bias_rises_to_zero_from_below(void **state)
{
    struct fixture *fixture = *state;
    fixture_put_bias(fixture, 0, -0.5F);
    fixture_put_bias(fixture, 1, -0.1F);
    learn_of_count(fixture, 0, 1);
    assert_near((double)fixture_bias(fixture, 0).value, -0.5 + 0.214399, 1e-5);
    learn_of_count(fixture, 1, 1);
    assert_near((double)fixture_bias(fixture, 1).value, 0.0, 0.0);
}

static void a_tag_that_has_lost_its_items_loses_its_bias_when_it_learns_again(void **state)
{
    struct fixture *fixture = *state;
    fixture_put_bias(fixture, 0, 0.5F);
    (void)fixture_score_of(fixture, 5, 0);
    assert_true(weights_is_touched(fixture->scratch, 0));
    learn_of_count(fixture, 0, 3);
    assert_near((double)fixture_bias(fixture, 0).value, 0.0, 0.0);
    (void)fixture_score_of(fixture, 5, 0);
    assert_false(weights_is_touched(fixture->scratch, 0));
    assert_int_equal(weights_changed_tag_count(fixture->weights), 1);
}

/* Nothing moves without being marked as changed, the bias that would be held included. */
static void a_bias_is_left_alone_where_there_is_nothing_to_learn(void **state)
{
    struct fixture *fixture = *state;
    fixture_put(fixture, 0, (const uint32_t[]){0}, (const float[]){2.0F}, 1); /* s = 1.5 */
    fixture_put_bias(fixture, 0, 0.5F);
    note_count(fixture, 0, 3);
    learn_of_count(fixture, 0, 3);
    assert_near((double)fixture_bias(fixture, 0).value, 0.5, 0.0);
    assert_int_equal(weights_changed_tag_count(fixture->weights), 0);
}

/* --- rivals -------------------------------------------------------------------------------------
 */

static void a_rival_is_pushed_down(void **state)
{
    struct fixture *fixture = *state;
    fixture_put(fixture, 0, (const uint32_t[]){1}, (const float[]){0.5F}, 1); /* s = -.5 */
    fixture_learn_one(fixture, 0, 0, 1.0);
    double after = fixture_score_of(fixture, 0, 1);
    assert_true(after < -0.5 && after >= -1.0);
    assert_true(fixture_bias(fixture, 1).value < 0.0F);
}

static void an_item_without_tags_pushes_all_its_rivals_down(void **state)
{
    struct fixture *fixture = *state;
    const struct weights_feature x = fixture_word(0, 1.0F);
    fixture_put(fixture, 0, (const uint32_t[]){0, 1}, (const float[]){0.5F, 1.5F}, 2);
    fixture_learn(fixture, &x, 1, NULL, 0);
    assert_true(fixture_score_of(fixture, 0, 0) < -0.5);
    assert_true(fixture_score_of(fixture, 0, 1) < 0.5);
}

static void a_tag_at_the_floor_is_no_rival(void **state)
{
    struct fixture *fixture = *state;
    fixture_put(fixture, 0, (const uint32_t[]){1}, (const float[]){0.01F},
                1); /* 20 steps: s = -.990234375 */
    fixture_learn_one(fixture, 0, 0, 1.0);
    assert_near(fixture_score_of(fixture, 0, 1), -0.990234375, 0.0);
    assert_near((double)fixture_bias(fixture, 1).accumulator, 0.0, 0.0);
}

static void only_a_tag_that_the_item_has_creates_a_weight(void **state)
{
    struct fixture *fixture = *state;
    fixture_put_bias(fixture, 1, 0.9F); /* a rival of everything, by its bias alone */
    fixture_learn_one(fixture, 0, 0, 1.0);
    assert_int_equal(weights_postings(fixture->weights), 1);
    assert_near((double)fixture_score_of(fixture, 0, 1),
                -1.0 + (double)fixture_bias(fixture, 1).value, 0.0);
    assert_true(fixture_bias(fixture, 1).value < 0.9F);
}

static void a_weight_that_is_there_is_not_created_again(void **state)
{
    struct fixture *fixture = *state;
    const struct weights_feature x[] = {fixture_word(0, 0.6F), fixture_word(1, 0.8F)};
    const struct weights_given given[] = {fixture_given(0, 1.0), fixture_given(2, 1.0)};
    fixture_learn(fixture, x, 2, given, 2);
    fixture_learn(fixture, x, 2, given, 2);
    assert_int_equal(weights_postings(fixture->weights), 4);
}

static void a_tag_that_the_item_does_not_touch_stays_as_it_is(void **state)
{
    struct fixture *fixture = *state;
    fixture_put(fixture, 1, (const uint32_t[]){2}, (const float[]){1.5F}, 1);
    fixture_learn_one(fixture, 0, 0, 1.0);
    assert_near(fixture_score_of(fixture, 1, 2), 0.5, 0.0);
}

/* --- the specificity rule -----------------------------------------------------------------------
 */

static void learn_common_word(struct fixture *fixture, uint32_t documents, uint32_t tag_count)
{
    const struct weights_feature x = {.word = 0, .document_count = documents, .value = 1.0F};
    const struct weights_given given = {.tag = 0, .tag_count = tag_count, .factors = {1.0}};
    fixture_learn(fixture, &x, 1, &given, 1);
}

static void a_word_too_common_for_the_tag_creates_no_weight(void **state)
{
    struct fixture *fixture = *state;
    const struct weights_settings settings = {.surrogate = SURROGATE_SQUARED_HINGE,
                                              .specificity = 100.0};
    assert_int_equal(fixture_renew(fixture, &settings), 0);
    learn_common_word(fixture, 1001, 10);
    assert_int_equal(weights_postings(fixture->weights), 0);
    assert_true(fixture_bias(fixture, 0).value > 0.0F); /* the bias learns alone */
    learn_common_word(fixture, 1000, 10);
    assert_int_equal(weights_postings(fixture->weights), 1);
}

static void a_weight_that_is_there_is_learned_however_common_the_word(void **state)
{
    struct fixture *fixture = *state;
    const struct weights_settings settings = {.surrogate = SURROGATE_SQUARED_HINGE,
                                              .specificity = 100.0};
    assert_int_equal(fixture_renew(fixture, &settings), 0);
    fixture_put(fixture, 0, (const uint32_t[]){0}, (const float[]){0.5F}, 1);
    learn_common_word(fixture, 1000000, 1);
    struct weights_bias bias = fixture_bias(fixture, 0);
    assert_true(fixture_score_of(fixture, 0, 0) > -0.5 + (double)bias.value + 1e-3);
}

static void without_the_rule_every_word_may_speak(void **state)
{
    struct fixture *fixture = *state;
    learn_common_word(fixture, 4000000000U, 1);
    assert_int_equal(weights_postings(fixture->weights), 1);
}

/* --- the other surrogates -----------------------------------------------------------------------
 */

/* Slope -1: the word's accumulator 1, its rate .5/√1.1 = .476731; the bias's .5² = .25, and
 * .25·.5/√.35 = .211289; D = .688020, α = min(1, 2/D) = 1. */
static void the_first_example_by_the_hinge(void **state)
{
    struct fixture *fixture = *state;
    const struct weights_settings settings = {.surrogate = SURROGATE_HINGE};
    assert_int_equal(fixture_renew(fixture, &settings), 0);
    fixture_learn_one(fixture, 0, 0, 1.0);
    assert_near((double)fixture_bias(fixture, 0).accumulator, 0.25, 1e-6);
    assert_near(fixture_score_of(fixture, 0, 0), -1.0 + 0.688020, FIXTURE_ROUNDED + 1e-5);
}

/* m = -1: slope -1/(1 + e^-1) = -.731059, the word's accumulator .534447, its rate .5/√.634447 =
 * .627729; the bias's a quarter of that, .133612, and .25·.5/√.233612 = .258620; D = .886350;
 * z + e^(z-1) = .886350 + e^-1 has z = .590348. */
static void the_first_example_by_the_logistic_loss(void **state)
{
    struct fixture *fixture = *state;
    const struct weights_settings settings = {.surrogate = SURROGATE_LOGISTIC};
    assert_int_equal(fixture_renew(fixture, &settings), 0);
    fixture_learn_one(fixture, 0, 0, 1.0);
    assert_near((double)fixture_bias(fixture, 0).accumulator, 0.133612, 1e-5);
    assert_near(fixture_score_of(fixture, 0, 0), -1.0 + 0.590348, FIXTURE_ROUNDED + 1e-5);
}

/* σ(s) = .05 at s = -2.944. */
static void the_logistic_loss_touches_rivals_above_one_in_twenty_alone(void **state)
{
    struct fixture *fixture = *state;
    const struct weights_settings settings = {.surrogate = SURROGATE_LOGISTIC};
    assert_int_equal(fixture_renew(fixture, &settings), 0);
    fixture_put(fixture, 0, (const uint32_t[]){1, 2}, (const float[]){-1.9F, -2.0F}, 2);
    fixture_learn_one(fixture, 0, 0, 1.0);
    assert_true(fixture_score_of(fixture, 0, 1) < -2.9 - FIXTURE_ROUNDED);
    assert_near(fixture_score_of(fixture, 0, 2), -3.0, 0.0);
}

int main(void)
{
#define weights_test(name) cmocka_unit_test_setup_teardown(name, fixture_set_up, fixture_tear_down)
    const struct CMUnitTest tests[] = {
        weights_test(the_first_example_by_hand),
        weights_test(a_factor_lengthens_the_step_and_not_the_accumulator),
        weights_test(no_factor_carries_a_score_beyond_one),
        weights_test(a_pair_that_counts_for_nothing_changes_nothing),
        weights_test(what_is_right_already_is_not_learned_again),
        weights_test(a_given_tag_s_count_is_noted_even_where_it_is_right_already),
        weights_test(a_rival_s_count_is_left_alone),
        weights_test(the_same_example_again_comes_nearer_to_one),
        weights_test(the_word_that_weighs_more_in_the_item_speaks_louder),
        weights_test(the_bias_of_a_new_tag_does_not_rise_above_zero),
        weights_test(from_the_tenth_item_on_a_tag_s_bias_may_rise_above_zero),
        weights_test(a_new_tag_s_bias_rises_to_zero_from_below),
        weights_test(a_tag_that_has_lost_its_items_loses_its_bias_when_it_learns_again),
        weights_test(a_bias_is_left_alone_where_there_is_nothing_to_learn),
        weights_test(a_rival_is_pushed_down),
        weights_test(an_item_without_tags_pushes_all_its_rivals_down),
        weights_test(a_tag_at_the_floor_is_no_rival),
        weights_test(only_a_tag_that_the_item_has_creates_a_weight),
        weights_test(a_weight_that_is_there_is_not_created_again),
        weights_test(a_tag_that_the_item_does_not_touch_stays_as_it_is),
        weights_test(a_word_too_common_for_the_tag_creates_no_weight),
        weights_test(a_weight_that_is_there_is_learned_however_common_the_word),
        weights_test(without_the_rule_every_word_may_speak),
        weights_test(the_first_example_by_the_hinge),
        weights_test(the_first_example_by_the_logistic_loss),
        weights_test(the_logistic_loss_touches_rivals_above_one_in_twenty_alone),
    };
    return cmocka_run_group_tests_name("learning weights", tests, NULL, NULL);
}
