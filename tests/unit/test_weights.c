/* Scores and their parts, from weights that were stored by hand. */
#include "daemon/learner/weights.h"

#include "tests/unit/near.h"
#include "tests/unit/weights_fixture.h"

/* Words 0 and 1, tags 0 and 1, as in every test that scores by hand. */
static void put_weights(struct fixture *fixture)
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
    struct fixture *fixture = *state;
    const struct weights_feature x[] = {fixture_word(0, 0.6F), fixture_word(1, 0.8F)};
    put_weights(fixture);
    fixture_score(fixture, x, 2);
    assert_near(fixture_tag_score(fixture, 0), 0.2, 1e-6);
    assert_near(fixture_tag_score(fixture, 1), -1.15, 1e-6);
    assert_near(fixture_tag_score(fixture, 2), -1.0, 0.0);
}

static void an_item_leaves_nothing_to_the_next(void **state)
{
    struct fixture *fixture = *state;
    put_weights(fixture);
    double first = fixture_score_of(fixture, 0, 0);
    assert_near(fixture_score_of(fixture, 9, 0), -0.9, 1e-6);
    assert_near(fixture_score_of(fixture, 0, 0), first, 0.0);
    assert_near(first, -0.4, 1e-6);
}

static void a_word_that_nobody_has_learned_says_nothing(void **state)
{
    struct fixture *fixture = *state;
    put_weights(fixture);
    assert_near(fixture_score_of(fixture, 1000000, 1), -1.0, 0.0);
}

/* As postings are read in place or from the base, so are both lanes' cells or one lane's. */
static void a_lane_more_leaves_the_first_one_s_scores_as_they_are(void **state)
{
    struct fixture *fixture = *state;
    const struct weights_settings settings = {.surrogate = SURROGATE_SQUARED_HINGE, .shadow = true};
    const struct weights_feature x[] = {fixture_word(0, 0.6F), fixture_word(1, 0.8F)};
    assert_int_equal(fixture_renew(fixture, &settings), 0);
    put_weights(fixture);
    for (fixture->lanes = 1; fixture->lanes <= WEIGHTS_LANES; fixture->lanes++) {
        fixture_score(fixture, x, 2);
        assert_near(fixture_tag_score(fixture, 0), 0.2, 1e-6);
        assert_near(fixture_tag_score(fixture, 1), -1.15, 1e-6);
    }
    assert_near((double)weights_tag_score(fixture->weights, fixture->scratch, WEIGHTS_SHADOW, 0),
                -1.0, 0.0);
}

static void an_item_without_words_has_scores_all_the_same(void **state)
{
    struct fixture *fixture = *state;
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

enum {
    MANY = 3000
};

static size_t touched_count(const struct fixture *fixture)
{
    size_t count = 0;
    for (uint32_t tag = 0; tag < MANY; tag++) {
        count += weights_is_touched(fixture->scratch, tag);
    }
    return count;
}

static void an_item_touches_the_tags_of_its_words_once_each(void **state)
{
    struct fixture *fixture = *state;
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

/* s_0 = -.4, s_1 = -1.25, which is below the floor; tag 2 by its bias alone, -.97. */
static void the_rivals_are_the_touched_tags_above_the_floor(void **state)
{
    struct fixture *fixture = *state;
    const struct weights_feature x = fixture_word(0, 1.0F);
    size_t count = 0;
    put_weights(fixture);
    fixture_put_bias(fixture, 2, 0.03F);
    fixture_score(fixture, &x, 1);
    const struct weights_rival *rivals = weights_rivals(fixture->scratch, WEIGHTS_MAIN, &count);
    assert_int_equal(count, 2);
    assert_int_equal(rivals[0].tag + rivals[1].tag, 2); /* 0 and 2, in no order */
    assert_int_not_equal(rivals[0].tag, 1);
    for (size_t i = 0; i < count; i++) {
        assert_near((double)rivals[i].score, rivals[i].tag == 0 ? -0.4 : -0.97, 1e-6);
    }
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

static bool speaks(const struct fixture *fixture, const struct weights_feature *x, size_t count)
{
    fixture_score(fixture, x, count);
    return weights_speak(fixture->scratch);
}

static void a_word_speaks_when_any_tag_has_a_weight_for_it(void **state)
{
    struct fixture *fixture = *state;
    const struct weights_feature x[] = {fixture_word(7, 0.6F), fixture_word(1, 0.8F)};
    assert_false(speaks(fixture, x, 2));
    put_weights(fixture); /* tag 0 is above the floor by its bias, which is no word */
    assert_true(speaks(fixture, x, 2));
    assert_false(speaks(fixture, x, 1));
    assert_false(speaks(fixture, NULL, 0));
}

static void as_many_tags_as_there_are_can_be_touched(void **state)
{
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
    struct fixture *fixture = *state;
    const struct weights_feature x[] = {fixture_word(0, 0.6F), fixture_word(8, 0.2F),
                                        fixture_word(1, 0.8F)};
    float parts[6] = {7, 7, 7, 7, 7, 7};
    put_weights(fixture);
    fixture_score(fixture, x, 3);
    fixture_explain(fixture, x, 3, (const uint32_t[]){1, 0}, 2, parts);
    const float expected[] = {-0.15F, 0.0F, 0.0F, 0.3F, 0.0F, 0.8F};
    for (size_t i = 0; i < 6; i++) {
        assert_float_equal(parts[i], expected[i], 1e-6F);
    }
}

static void explaining_leaves_the_scores_as_they_are(void **state)
{
    struct fixture *fixture = *state;
    const struct weights_feature x = fixture_word(0, 1.0F);
    float part = 7.0F;
    put_weights(fixture);
    fixture_score(fixture, &x, 1);
    fixture_explain(fixture, &x, 1, (const uint32_t[]){0}, 1, &part);
    assert_near(fixture_tag_score(fixture, 0), -0.4, 1e-6);
    fixture_explain(fixture, &x, 1, (const uint32_t[]){2}, 1, &part);
    assert_float_equal(part, 0.0F, 0.0F);
}

/* Thirty words, three of them without a weight, and two tags: s = -1 + b + the parts, in the order
 * in which they were added. */
static void the_parts_add_up_to_the_score(void **state)
{
    enum {
        WORDS = 30
    };
    struct fixture *fixture = *state;
    struct weights_feature x[WORDS];
    float parts[2 * WORDS];
    fixture_put_bias(fixture, 1, -0.3F);
    for (uint32_t word = 0; word < WORDS; word++) {
        const float values[] = {(float)word / 16.0F - 1.0F, 1.0F / (float)(word + 1)};
        x[word] = fixture_word(word, 0.18F);
        if (word % 10 != 0) {
            fixture_put(fixture, word, (const uint32_t[]){1, 3}, values, 2);
        }
    }
    fixture_score(fixture, x, WORDS);
    fixture_explain(fixture, x, WORDS, (const uint32_t[]){3, 1}, 2, parts);
    float sums[] = {0.0F, 0.0F};
    for (size_t i = 0; i < WORDS; i++) {
        sums[0] += parts[i];
        sums[1] += parts[WORDS + i];
    }
    assert_near(fixture_tag_score(fixture, 3), -1.0 + (double)sums[0], 1e-6);
    assert_near(fixture_tag_score(fixture, 1), -1.3 + (double)sums[1], 1e-6);
    assert_true(sums[0] > 0.0F && sums[1] != 0.0F);
}

/* --- size ---------------------------------------------------------------------------------------
 */

/* Of the 5 postings in the end all are in memory, 8 bytes each. */
static void postings_are_counted_over_all_words(void **state)
{
    struct fixture *fixture = *state;
    const struct weights_feature x[] = {fixture_word(0, 0.6F), fixture_word(1, 0.8F)};
    const struct weights_given given = fixture_given(2, 1.0);
    uint64_t bytes = weights_bytes(fixture->weights);
    put_weights(fixture);
    assert_int_equal(weights_postings(fixture->weights), 3);
    fixture_learn(fixture, x, 2, &given, 1);
    assert_int_equal(weights_postings(fixture->weights), 5);
    assert_true(weights_bytes(fixture->weights) >= bytes + 40);
}

static void a_forgotten_word_says_nothing_and_takes_no_room(void **state)
{
    struct fixture *fixture = *state;
    const struct weights_feature x[] = {fixture_word(0, 0.6F), fixture_word(1, 0.8F)};
    put_weights(fixture);
    assert_int_equal(weights_admit(fixture->weights, &fixture->stored.base, x, 2), 0);
    uint64_t bytes = weights_bytes(fixture->weights);
    fixture_forget(fixture, 0);
    assert_near(fixture_score_of(fixture, 0, 1), -1.0, 0.0);
    assert_near(fixture_score_of(fixture, 1, 0), 0.1, 1e-6); /* the other word stays */
    assert_int_equal(weights_postings(fixture->weights), 1);
    assert_true(weights_bytes(fixture->weights) < bytes);
}

static void a_word_that_is_only_stored_is_counted_out_when_it_is_forgotten(void **state)
{
    struct fixture *fixture = *state;
    put_weights(fixture);
    fixture_forget(fixture, 0);
    assert_int_equal(weights_postings(fixture->weights), 1);
}

static void a_word_never_learned_is_forgotten_in_peace(void **state)
{
    struct fixture *fixture = *state;
    put_weights(fixture);
    fixture_forget(fixture, 123456);
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
        weights_test(a_lane_more_leaves_the_first_one_s_scores_as_they_are),
        weights_test(an_item_without_words_has_scores_all_the_same),
        weights_test(a_tag_beyond_all_that_are_known_scores_minus_one),
        weights_test(an_item_touches_the_tags_of_its_words_once_each),
        weights_test(a_tag_whose_bias_alone_lifts_it_above_the_floor_is_touched),
        weights_test(the_rivals_are_the_touched_tags_above_the_floor),
        weights_test(a_tag_whose_bias_falls_is_touched_no_more),
        weights_test(a_word_speaks_when_any_tag_has_a_weight_for_it),
        weights_test(as_many_tags_as_there_are_can_be_touched),
        weights_test(the_parts_are_what_each_word_adds_to_each_tag),
        weights_test(explaining_leaves_the_scores_as_they_are),
        weights_test(the_parts_add_up_to_the_score),
        weights_test(postings_are_counted_over_all_words),
        weights_test(a_forgotten_word_says_nothing_and_takes_no_room),
        weights_test(a_word_that_is_only_stored_is_counted_out_when_it_is_forgotten),
        weights_test(a_word_never_learned_is_forgotten_in_peace),
    };
    return cmocka_run_group_tests_name("weights", tests, NULL, NULL);
}
