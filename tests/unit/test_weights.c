/* Scores and their parts, from weights that were put there by hand. */
#include "daemon/learner/weights.h"

#include "tests/unit/near.h"
#include "tests/unit/weights_fixture.h"

/* Words 0 and 1, tags 0 and 1, as in every test that scores by hand. */
static void put_weights(const struct fixture *fixture)
{
    fixture_put(fixture, 0, (const uint32_t[]){0, 1}, (const float[]){0.5F, -0.25F}, 2);
    fixture_put(fixture, 1, (const uint32_t[]){0}, (const float[]){1.0F}, 1);
    fixture_put_bias(fixture, 0, 0.1F);
}

static void a_tag_that_nothing_speaks_for_scores_minus_one(void **state)
{
    assert_near(fixture_score_of(*state, 0, 2), -1.0, 0.0);
}

/* x = (.6, .8): s_0 = -1 + .1 + .5·.6 + 1·.8 = .2; s_1 = -1 - .25·.6 = -1.15. */
static void a_score_is_base_and_bias_and_the_sum_over_the_words(void **state)
{
    const struct fixture *fixture = *state;
    const struct weights_feature x[] = {fixture_word(0, 0.6F), fixture_word(1, 0.8F)};
    put_weights(fixture);
    fixture_score(fixture, x, 2);
    assert_near(fixture_tag_score(fixture, 0), 0.2, 1e-6);
    assert_near(fixture_tag_score(fixture, 1), -1.15, 1e-6);
    assert_near(fixture_tag_score(fixture, 2), -1.0, 0.0);
}

static void an_item_leaves_nothing_to_the_next(void **state)
{
    const struct fixture *fixture = *state;
    put_weights(fixture);
    double first = fixture_score_of(fixture, 0, 0);
    assert_near(fixture_score_of(fixture, 9, 0), -0.9, 1e-6);
    assert_near(fixture_score_of(fixture, 0, 0), first, 0.0);
    assert_near(first, -0.4, 1e-6);
}

static void a_word_that_nobody_has_learned_says_nothing(void **state)
{
    const struct fixture *fixture = *state;
    put_weights(fixture);
    assert_near(fixture_score_of(fixture, 1000000, 1), -1.0, 0.0);
}

static void an_item_without_words_has_scores_all_the_same(void **state)
{
    const struct fixture *fixture = *state;
    put_weights(fixture);
    fixture_score(fixture, NULL, 0);
    assert_near(fixture_tag_score(fixture, 0), -0.9, 1e-6);
    assert_near(fixture_tag_score(fixture, 1), -1.0, 0.0);
}

static void a_tag_beyond_all_that_are_known_scores_minus_one(void **state)
{
    const struct fixture *fixture = *state;
    fixture_score(fixture, NULL, 0);
    assert_near(fixture_tag_score(fixture, 5000), -1.0, 0.0);
}

/* --- which tags an item touches -----------------------------------------------------------------
 */

static size_t touched_count(const struct fixture *fixture)
{
    size_t count = 0;
    (void)weights_touched(fixture->scratch, &count);
    return count;
}

static void an_item_touches_the_tags_of_its_words_once_each(void **state)
{
    const struct fixture *fixture = *state;
    fixture_put(fixture, 0, (const uint32_t[]){0, 1}, (const float[]){0.5F, -0.25F}, 2);
    fixture_put(fixture, 1, (const uint32_t[]){1, 3}, (const float[]){0.5F, 0.5F}, 2);
    const struct weights_feature x[] = {fixture_word(0, 0.6F), fixture_word(1, 0.8F)};
    fixture_score(fixture, x, 2);
    assert_int_equal(touched_count(fixture), 3);
    assert_true(weights_is_touched(fixture->scratch, 0));
    assert_true(weights_is_touched(fixture->scratch, 1));
    assert_false(weights_is_touched(fixture->scratch, 2));
    assert_true(weights_is_touched(fixture->scratch, 3));
}

static void a_tag_whose_bias_alone_lifts_it_above_the_floor_is_touched(void **state)
{
    const struct fixture *fixture = *state;
    fixture_put_bias(fixture, 1, 0.01F); /* -.99, below */
    fixture_put_bias(fixture, 2, 0.03F); /* -.97, above */
    fixture_score(fixture, NULL, 0);
    assert_int_equal(touched_count(fixture), 1);
    assert_true(weights_is_touched(fixture->scratch, 2));
    assert_near(fixture_tag_score(fixture, 2), -0.97, 1e-6);
}

static void a_tag_whose_bias_falls_is_touched_no_more(void **state)
{
    const struct fixture *fixture = *state;
    for (uint32_t tag = 0; tag < 3; tag++) {
        fixture_put_bias(fixture, tag, 0.5F);
    }
    fixture_put_bias(fixture, 0, 0.0F);
    fixture_put_bias(fixture, 0, -0.5F);
    fixture_score(fixture, NULL, 0);
    assert_int_equal(touched_count(fixture), 2);
    fixture_put_bias(fixture, 2, 0.0F);
    fixture_put_bias(fixture, 0, 0.5F);
    fixture_score(fixture, NULL, 0);
    assert_int_equal(touched_count(fixture), 2);
    assert_true(weights_is_touched(fixture->scratch, 0));
    assert_true(weights_is_touched(fixture->scratch, 1));
}

static void a_word_speaks_when_any_tag_has_a_weight_for_it(void **state)
{
    const struct fixture *fixture = *state;
    const struct weights_feature x[] = {fixture_word(7, 0.6F), fixture_word(1, 0.8F)};
    assert_false(weights_speak(fixture->weights, x, 2));
    put_weights(fixture);
    assert_true(weights_speak(fixture->weights, x, 2));
    assert_false(weights_speak(fixture->weights, x, 1));
    assert_false(weights_speak(fixture->weights, NULL, 0));
}

static void as_many_tags_as_there_are_can_be_touched(void **state)
{
    enum {
        MANY = 3000
    };
    const struct fixture *fixture = *state;
    assert_int_equal(weights_reserve_tags(fixture->weights, MANY), 0);
    for (uint32_t tag = 0; tag < MANY; tag++) {
        fixture_put_bias(fixture, tag, 0.5F);
    }
    fixture_score(fixture, NULL, 0);
    assert_int_equal(touched_count(fixture), MANY);
}

/* --- what the words add -------------------------------------------------------------------------
 */

static void the_parts_are_what_each_word_adds_to_each_tag(void **state)
{
    const struct fixture *fixture = *state;
    const struct weights_feature x[] = {fixture_word(0, 0.6F), fixture_word(8, 0.2F),
                                        fixture_word(1, 0.8F)};
    float parts[6] = {7, 7, 7, 7, 7, 7};
    put_weights(fixture);
    fixture_score(fixture, x, 3);
    weights_explain(fixture->weights, x, 3, (const uint32_t[]){1, 0}, 2, fixture->scratch, parts);
    const float expected[] = {-0.15F, 0.0F, 0.0F, 0.3F, 0.0F, 0.8F};
    for (size_t i = 0; i < 6; i++) {
        assert_float_equal(parts[i], expected[i], 1e-6F);
    }
}

static void explaining_leaves_the_scores_as_they_are(void **state)
{
    const struct fixture *fixture = *state;
    const struct weights_feature x = fixture_word(0, 1.0F);
    float part = 7.0F;
    put_weights(fixture);
    fixture_score(fixture, &x, 1);
    weights_explain(fixture->weights, &x, 1, (const uint32_t[]){0}, 1, fixture->scratch, &part);
    assert_near(fixture_tag_score(fixture, 0), -0.4, 1e-6);
    weights_explain(fixture->weights, &x, 1, (const uint32_t[]){2}, 1, fixture->scratch, &part);
    assert_float_equal(part, 0.0F, 0.0F);
}

/* --- size ---------------------------------------------------------------------------------------
 */

static void postings_are_counted_over_all_words(void **state)
{
    const struct fixture *fixture = *state;
    uint64_t bytes = weights_bytes(fixture->weights);
    put_weights(fixture);
    assert_int_equal(weights_postings(fixture->weights), 3);
    assert_true(weights_bytes(fixture->weights) >= bytes + 36);
}

static void a_forgotten_word_says_nothing_and_takes_no_room(void **state)
{
    const struct fixture *fixture = *state;
    put_weights(fixture);
    uint64_t bytes = weights_bytes(fixture->weights);
    weights_forget_word(fixture->weights, 0);
    assert_near(fixture_score_of(fixture, 0, 1), -1.0, 0.0);
    assert_near(fixture_score_of(fixture, 1, 0), 0.1, 1e-6); /* the other word stays */
    assert_int_equal(weights_postings(fixture->weights), 1);
    assert_true(weights_bytes(fixture->weights) < bytes);
}

static void a_word_never_learned_is_forgotten_in_peace(void **state)
{
    const struct fixture *fixture = *state;
    put_weights(fixture);
    weights_forget_word(fixture->weights, 123456);
    assert_int_equal(weights_postings(fixture->weights), 3);
}

int main(void)
{
#define weights_test(name) cmocka_unit_test_setup_teardown(name, fixture_set_up, fixture_tear_down)
    const struct CMUnitTest tests[] = {
        weights_test(a_tag_that_nothing_speaks_for_scores_minus_one),
        weights_test(a_score_is_base_and_bias_and_the_sum_over_the_words),
        weights_test(an_item_leaves_nothing_to_the_next),
        weights_test(a_word_that_nobody_has_learned_says_nothing),
        weights_test(an_item_without_words_has_scores_all_the_same),
        weights_test(a_tag_beyond_all_that_are_known_scores_minus_one),
        weights_test(an_item_touches_the_tags_of_its_words_once_each),
        weights_test(a_tag_whose_bias_alone_lifts_it_above_the_floor_is_touched),
        weights_test(a_tag_whose_bias_falls_is_touched_no_more),
        weights_test(a_word_speaks_when_any_tag_has_a_weight_for_it),
        weights_test(as_many_tags_as_there_are_can_be_touched),
        weights_test(the_parts_are_what_each_word_adds_to_each_tag),
        weights_test(explaining_leaves_the_scores_as_they_are),
        weights_test(postings_are_counted_over_all_words),
        weights_test(a_forgotten_word_says_nothing_and_takes_no_room),
        weights_test(a_word_never_learned_is_forgotten_in_peace),
    };
    return cmocka_run_group_tests_name("weights", tests, NULL, NULL);
}
