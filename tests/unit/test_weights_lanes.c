/*
 * Two learners in one list of postings: neither sees the other.
 *
 * Words have fewer postings here than are put in order: when that happens is common to both lanes.
 */
#include "daemon/learner/weights.h"

#include <string.h>

#include "tests/unit/near.h"
#include "tests/unit/repeatable.h"
#include "tests/unit/weights_fixture.h"

enum {
    WORDS = 40,
    TAGS = 50,
    ITEMS = 400
};

static const struct weights_settings ALONE = {.surrogate = SURROGATE_SQUARED_HINGE};
static const struct weights_settings WITH_SHADOW = {.surrogate = SURROGATE_SQUARED_HINGE,
                                                    .shadow = true};

struct pair {
    struct fixture one;
    struct fixture other;
};

static int set_up(void **state)
{
    static struct pair pair;
    *state = &pair;
    return 0;
}

static int tear_down(void **state)
{
    struct pair *pair = *state;
    fixture_end(&pair->one);
    fixture_end(&pair->other);
    return 0;
}

static void begin(struct fixture *fixture, const struct weights_settings *settings)
{
    assert_int_equal(fixture_renew(fixture, settings), 0);
    assert_int_equal(weights_reserve_tags(fixture->weights, TAGS), 0);
}

/* Learns the same items every time, whose factors in the main lane may be other ones. */
static void learn_items(struct fixture *fixture, const double *main_factor)
{
    struct repeatable random = {8};
    for (uint32_t i = 1; i <= ITEMS; i++) {
        struct fixture_item item;
        fixture_draw_item(&random, WORDS, TAGS, i, &item);
        for (size_t k = 0; main_factor && k < item.given_count; k++) {
            item.given[k].factors[WEIGHTS_MAIN] = *main_factor;
        }
        fixture_learn(fixture, item.x, FIXTURE_ITEM_WORDS, item.given, item.given_count);
    }
}

/* Items that were not learned: the largest difference of a score in one lane from another's. */
static double largest_difference(const struct fixture *one, enum weights_lane lane,
                                 const struct fixture *other, enum weights_lane other_lane)
{
    struct repeatable random = {9};
    double largest = 0.0;
    for (uint32_t i = 1; i <= 100; i++) {
        struct fixture_item item;
        float scores[TAGS];
        float others[TAGS];
        fixture_draw_item(&random, WORDS, TAGS, i, &item);
        fixture_score_all(one, &item, lane, TAGS, scores);
        fixture_score_all(other, &item, other_lane, TAGS, others);
        for (size_t tag = 0; tag < TAGS; tag++) {
            largest = fmax(largest, fabs((double)scores[tag] - (double)others[tag]));
        }
    }
    return largest;
}

static void assert_same_biases(const struct fixture *one, enum weights_lane lane,
                               const struct fixture *other, enum weights_lane other_lane)
{
    size_t learned = 0;
    for (uint32_t tag = 0; tag < TAGS; tag++) {
        struct weights_bias a = weights_bias(one->weights, lane, tag);
        struct weights_bias b = weights_bias(other->weights, other_lane, tag);
        assert_memory_equal(&a, &b, sizeof a);
        learned += a.accumulator > 0.0F;
    }
    assert_true(learned > TAGS / 2);
}

/* --- every cell ---------------------------------------------------------------------------------
 */

/* A lane's cells, by word and tag; those of no weight at all are 0, listed or not. */
struct cells {
    uint32_t of[WORDS + FIXTURE_ITEM_WORDS][TAGS];
};

static void read_cells(struct fixture *fixture, enum weights_lane lane, struct cells *ret_cells)
{
    size_t stride = 1 + (size_t)fixture->lanes;
    memset(ret_cells, 0, sizeof *ret_cells);
    fixture_store(fixture);
    for (size_t i = 0; i < fixture->stored.count; i++) {
        const struct fake_chunk *chunk = &fixture->stored.list[i];
        uint32_t numbers[POSTINGS_MOST_NUMBERS];
        memcpy(numbers, chunk->block + 1, chunk->size);
        for (size_t j = 0; j < chunk->size / (4 * stride); j++) {
            const uint32_t *posting = numbers + j * stride;
            ret_cells->of[chunk->key >> 32U][posting[0]] = posting[1 + lane];
        }
    }
}

static void assert_same_cells(struct fixture *one, struct fixture *other, enum weights_lane lane)
{
    static struct cells cells;
    static struct cells others;
    read_cells(one, lane, &cells);
    read_cells(other, lane, &others);
    assert_memory_equal(&cells, &others, sizeof cells);
    assert_true(weights_postings(one->weights) > 200);
}

/* --- the lanes ----------------------------------------------------------------------------------
 */

static void the_main_lane_is_the_same_with_a_shadow_and_without(void **state)
{
    struct pair *pair = *state;
    begin(&pair->one, &ALONE);
    begin(&pair->other, &WITH_SHADOW);
    learn_items(&pair->one, NULL);
    learn_items(&pair->other, NULL);
    assert_near(largest_difference(&pair->one, WEIGHTS_MAIN, &pair->other, WEIGHTS_MAIN), 0.0, 0.0);
    assert_same_biases(&pair->one, WEIGHTS_MAIN, &pair->other, WEIGHTS_MAIN);
    assert_same_cells(&pair->one, &pair->other, WEIGHTS_MAIN);
}

/* A main lane whose pairs count for nothing learns nothing. */
static void the_shadow_is_the_same_whatever_the_main_lane_learns(void **state)
{
    struct pair *pair = *state;
    const double nothing = 0.0;
    begin(&pair->one, &WITH_SHADOW);
    begin(&pair->other, &WITH_SHADOW);
    learn_items(&pair->one, NULL);
    learn_items(&pair->other, &nothing);
    assert_near((double)weights_bias(pair->other.weights, WEIGHTS_MAIN, 0).accumulator, 0.0, 0.0);
    assert_near(largest_difference(&pair->one, WEIGHTS_SHADOW, &pair->other, WEIGHTS_SHADOW), 0.0,
                0.0);
    assert_same_biases(&pair->one, WEIGHTS_SHADOW, &pair->other, WEIGHTS_SHADOW);
    assert_same_cells(&pair->one, &pair->other, WEIGHTS_SHADOW);
}

/*
 * Noise is each lane's own, so they are the same but for rounding. A weight is rounded at most once
 * an item, with a standard deviation of at most half a step: 400 times are at most 10 steps, and of
 * a difference 14.1; the words of an item are weighed by an x of length 1, so that of a score is no
 * more. What is off is learned again, so it does not add up further. Five times 14.1/2048 = .035.
 */
static void the_shadow_learns_as_a_lone_learner_with_factors_of_one(void **state)
{
    struct pair *pair = *state;
    const double one = 1.0;
    begin(&pair->one, &ALONE);
    begin(&pair->other, &WITH_SHADOW);
    learn_items(&pair->one, &one);
    learn_items(&pair->other, NULL);
    double same = largest_difference(&pair->one, WEIGHTS_MAIN, &pair->other, WEIGHTS_SHADOW);
    double unlike = largest_difference(&pair->one, WEIGHTS_MAIN, &pair->other, WEIGHTS_MAIN);
    print_message("largest difference %.4f, of the main lane %.4f\n", same, unlike);
    assert_true(same > 0.0 && same < 0.035);
    assert_true(unlike > 0.1); /* the factors do make one */
}

/* A bias is not rounded: with no weights there is no difference. */
static void biases_alone_are_a_lone_learner_s_to_the_bit(void **state)
{
    struct pair *pair = *state;
    const double one = 1.0;
    struct weights_settings settings = {.surrogate = SURROGATE_SQUARED_HINGE, .specificity = 1e-9};
    begin(&pair->one, &settings);
    settings.shadow = true;
    begin(&pair->other, &settings);
    learn_items(&pair->one, &one);
    learn_items(&pair->other, NULL);
    assert_int_equal(weights_postings(pair->other.weights), 0);
    assert_same_biases(&pair->one, WEIGHTS_MAIN, &pair->other, WEIGHTS_SHADOW);
}

/* By hand, as in the tests of learning: factor 1 makes a weight of .416101 and a bias of .206139,
 * and factor 3 a score of .346177. */
static void one_example_teaches_each_lane_by_its_own_factor(void **state)
{
    struct pair *pair = *state;
    const struct weights_feature x = fixture_word(0, 1.0F);
    const struct weights_given given = {
        .tag = 1, .tag_count = FIXTURE_COUNT, .factors = {3.0, 1.0}};
    begin(&pair->one, &WITH_SHADOW);
    fixture_learn(&pair->one, &x, 1, &given, 1);
    fixture_score(&pair->one, &x, 1);
    assert_near(fixture_tag_score(&pair->one, 1), 0.346177, FIXTURE_ROUNDED + 1e-5);
    assert_near((double)weights_tag_score(pair->one.weights, pair->one.scratch, WEIGHTS_SHADOW, 1),
                -1.0 + 0.416101 + 0.206139, FIXTURE_ROUNDED + 1e-5);
    assert_int_equal(weights_postings(pair->one.weights), 1);
}

static void what_the_main_lane_alone_learns_leaves_the_shadow_as_it_is(void **state)
{
    struct pair *pair = *state;
    const struct weights_feature x = fixture_word(0, 1.0F);
    begin(&pair->one, &WITH_SHADOW);
    pair->one.lanes = 1;
    fixture_learn_one(&pair->one, 0, 1, 1.0);
    pair->one.lanes = WEIGHTS_LANES;
    fixture_score(&pair->one, &x, 1);
    assert_true(fixture_tag_score(&pair->one, 1) > -0.5);
    assert_near((double)weights_tag_score(pair->one.weights, pair->one.scratch, WEIGHTS_SHADOW, 1),
                -1.0, 0.0);
}

/* Watched tags move by what the main lane adds, but for rounding. */
static void the_moves_that_are_told_are_the_main_lane_s(void **state)
{
    struct pair *pair = *state;
    const struct weights_feature x = fixture_word(0, 1.0F);
    const struct weights_given given = {
        .tag = 1, .tag_count = FIXTURE_COUNT, .factors = {3.0, 1.0}};
    const uint32_t watched[] = {2, 1};
    float moves[] = {7.0F, 7.0F};
    begin(&pair->one, &WITH_SHADOW);
    fixture_learn_example(&pair->one, &(const struct weights_example){.x = &x,
                                                                      .count = 1,
                                                                      .given = &given,
                                                                      .given_count = 1,
                                                                      .watched = watched,
                                                                      .watched_count = 2,
                                                                      .moves = moves});
    assert_near((double)moves[0], 0.0, 0.0);
    assert_near((double)moves[1], 1.346177, 1e-5);
}

int main(void)
{
#define lanes_test(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)
    const struct CMUnitTest tests[] = {
        lanes_test(the_main_lane_is_the_same_with_a_shadow_and_without),
        lanes_test(the_shadow_is_the_same_whatever_the_main_lane_learns),
        lanes_test(the_shadow_learns_as_a_lone_learner_with_factors_of_one),
        lanes_test(biases_alone_are_a_lone_learner_s_to_the_bit),
        lanes_test(one_example_teaches_each_lane_by_its_own_factor),
        lanes_test(what_the_main_lane_alone_learns_leaves_the_shadow_as_it_is),
        lanes_test(the_moves_that_are_told_are_the_main_lane_s),
    };
    return cmocka_run_group_tests_name("two lanes of weights", tests, NULL, NULL);
}
