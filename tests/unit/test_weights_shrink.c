/*
 * Shrinkage: by how much a weight shrinks, how a word's items share it, and what it leaves alone.
 *
 * A stored cell's accumulator is .1, so that with a step of .1 its rate is .1/√.1 = .316228.
 */
#include "daemon/learner/weights.h"

#include <math.h>

#include "tests/unit/weights_fixture.h"

enum {
    WORD = 5,
    TAG = 2,
    MANY = 4000 /* items that hold a common word */
};

static const double RATE = 0.316228;

static struct weights_feature held_by(uint32_t word, uint32_t items)
{
    return (struct weights_feature){.word = word, .document_count = items, .value = 1.0F};
}

/* As an item of one word comes by; each call is another example. */
static void shrink(struct fixture *fixture, struct weights_feature x, double cost)
{
    const struct weights_shrinkage shrinkage = {
        .number = ++fixture->number, .x = &x, .count = 1, .step = 0.1, .cost = cost};
    assert_int_equal(weights_admit(fixture->weights, &fixture->stored.base, &x, 1), 0);
    assert_int_equal(weights_shrink(fixture->weights, &shrinkage), 0);
}

static void put_one(struct fixture *fixture, float weight)
{
    const uint32_t tag = TAG;
    fixture_put(fixture, WORD, &tag, &weight, 1);
}

static double weight_of(const struct fixture *fixture)
{
    return fixture_score_of(fixture, WORD, TAG) + 1.0;
}

/* 1 / (1 + .316228/.5) = .612574. */
static void a_word_of_one_item_shrinks_as_a_whole(void **state)
{
    struct fixture *fixture = *state;
    put_one(fixture, 1.0F);
    shrink(fixture, held_by(WORD, 1), 0.5);
    assert_near(weight_of(fixture), 0.612574, FIXTURE_ROUNDED + 0.001);
}

static void a_weight_below_0_shrinks_towards_0(void **state)
{
    struct fixture *fixture = *state;
    put_one(fixture, -1.0F);
    shrink(fixture, held_by(WORD, 1), 0.5);
    assert_near(weight_of(fixture), -0.612574, FIXTURE_ROUNDED + 0.001);
}

/* 1 / (1 + .316228/100) = .996848: the greater C, the less. */
static void the_more_a_loss_weighs_the_less_it_shrinks(void **state)
{
    struct fixture *fixture = *state;
    put_one(fixture, 1.0F);
    shrink(fixture, held_by(WORD, 1), 100.0);
    assert_near(weight_of(fixture), 0.996848, FIXTURE_ROUNDED + 0.0001);
}

/* Four items bring a quarter each: 1 / (1 + .25·.316228/.5)⁴ = 1 / 1.158114⁴ = .555906. */
static void the_items_that_hold_a_word_share_it(void **state)
{
    struct fixture *fixture = *state;
    put_one(fixture, 1.0F);
    for (int item = 0; item < 4; item++) {
        shrink(fixture, held_by(WORD, 4), 0.5);
    }
    assert_near(weight_of(fixture), 0.555906, 4.0 * FIXTURE_ROUNDED + 0.001);
}

/*
 * Of 4,000 items about 8 bring an eighth: with C = 10, 8 of them make 1 / (1 + .316228/80)^8 =
 * .96894. Those drawn are 8 ± 2.8; three standard deviations are within .936 … 1 - .0039·1.
 */
static void a_common_word_shrinks_at_some_of_its_items(void **state)
{
    struct fixture *fixture = *state;
    size_t changes = 0;
    double before = 1.0;
    put_one(fixture, 1.0F);
    for (int item = 0; item < MANY; item++) {
        shrink(fixture, held_by(WORD, MANY), 10.0);
        double after = weight_of(fixture);
        changes += after != before ? 1 : 0;
        before = after;
    }
    assert_in_range(changes, 1, 17);
    assert_near(before, pow(1.0 + RATE / 80.0, -(double)changes),
                (double)changes * FIXTURE_ROUNDED);
}

/* A part of .316228/8/500 of a weight of .5 is .08 steps of a cell: a hundred of them are 8, but
 * for chance, whose standard deviation is √(100·.08·.92) = 2.7. */
static void many_small_parts_add_up(void **state)
{
    struct fixture *fixture = *state;
    put_one(fixture, 0.5F);
    for (int item = 0; item < 100; item++) {
        shrink(fixture, held_by(WORD, 8), 500.0);
    }
    double steps = (0.5 - weight_of(fixture)) / (double)CELL_STEP;
    assert_true(steps > 1.0 && steps < 17.0);
}

/* An example of step .5 raises G of a word's weight from 0 to 16: its rate with .1 is then
 * .1/√16.1 = .024922, and 1 / (1 + .024922/.5) = .952521. */
static void what_has_been_learned_much_shrinks_less(void **state)
{
    struct fixture *fixture = *state;
    fixture_learn_one(fixture, WORD, TAG, 1.0);
    double bias = (double)fixture_bias(fixture, TAG).value;
    double before = weight_of(fixture) - bias;
    assert_true(before > 0.1);
    shrink(fixture, held_by(WORD, 1), 0.5);
    assert_near((weight_of(fixture) - bias) / before, 0.952521, 0.01);
}

static void biases_stay_as_they_are(void **state)
{
    struct fixture *fixture = *state;
    fixture_learn_one(fixture, WORD, TAG, 1.0);
    const struct weights_bias before = fixture_bias(fixture, TAG);
    assert_true(before.value > 0.0F);
    shrink(fixture, held_by(WORD, 1), 0.5);
    const struct weights_bias after = fixture_bias(fixture, TAG);
    assert_true(after.value == before.value && after.accumulator == before.accumulator);
}

static void other_words_stay_as_they_are(void **state)
{
    struct fixture *fixture = *state;
    put_one(fixture, 1.0F);
    shrink(fixture, held_by(WORD + 1, 1), 0.5);
    assert_near(weight_of(fixture), 1.0, 1e-6);
}

static void both_lanes_shrink_alike(void **state)
{
    struct fixture *fixture = *state;
    const struct weights_settings settings = {.surrogate = SURROGATE_SQUARED_HINGE, .shadow = true};
    double before[WEIGHTS_LANES];
    assert_int_equal(fixture_renew(fixture, &settings), 0);
    fixture_learn_one(fixture, WORD, TAG, 1.0);
    for (enum weights_lane lane = WEIGHTS_MAIN; lane < WEIGHTS_LANES; lane++) {
        (void)fixture_score_of(fixture, WORD, TAG);
        before[lane] = (double)weights_tag_score(fixture->weights, fixture->scratch, lane, TAG) +
                       1.0 - (double)weights_bias(fixture->weights, lane, TAG).value;
    }
    shrink(fixture, held_by(WORD, 1), 0.5);
    for (enum weights_lane lane = WEIGHTS_MAIN; lane < WEIGHTS_LANES; lane++) {
        (void)fixture_score_of(fixture, WORD, TAG);
        double after = (double)weights_tag_score(fixture->weights, fixture->scratch, lane, TAG) +
                       1.0 - (double)weights_bias(fixture->weights, lane, TAG).value;
        assert_near(after / before[lane], 0.952521, 0.01);
    }
}

/* Stored and read again, the weight is what it has become. */
static void what_has_shrunk_is_stored(void **state)
{
    struct fixture *fixture = *state;
    put_one(fixture, 1.0F);
    assert_int_equal(weights_changed_count(fixture->weights), 0);
    shrink(fixture, held_by(WORD, 1), 0.5);
    double shrunk = weight_of(fixture);
    assert_int_equal(weights_changed_count(fixture->weights), 1);
    fixture_store(fixture);
    for (int call = 0; call < 4; call++) {
        weights_trim(fixture->weights, 0);
    }
    assert_near(weight_of(fixture), shrunk, 1e-6);
}

int main(void)
{
#define shrink_test(name) cmocka_unit_test_setup_teardown(name, fixture_set_up, fixture_tear_down)
    const struct CMUnitTest tests[] = {
        shrink_test(a_word_of_one_item_shrinks_as_a_whole),
        shrink_test(a_weight_below_0_shrinks_towards_0),
        shrink_test(the_more_a_loss_weighs_the_less_it_shrinks),
        shrink_test(the_items_that_hold_a_word_share_it),
        shrink_test(a_common_word_shrinks_at_some_of_its_items),
        shrink_test(many_small_parts_add_up),
        shrink_test(what_has_been_learned_much_shrinks_less),
        shrink_test(biases_stay_as_they_are),
        shrink_test(other_words_stay_as_they_are),
        shrink_test(both_lanes_shrink_alike),
        shrink_test(what_has_shrunk_is_stored),
    };
    return cmocka_run_group_tests_name("shrinkage", tests, NULL, NULL);
}
