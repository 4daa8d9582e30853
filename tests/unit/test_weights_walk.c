/*
 * What is in memory changes nothing that comes out: one learner that lets go of all it can, stores
 * what has changed and is cleaned at any moment, beside one that has everything in memory.
 */
#include "daemon/learner/weights.h"

#include <string.h>

#include "tests/unit/near.h"
#include "tests/unit/repeatable.h"
#include "tests/unit/weights_fixture.h"

enum {
    WORDS = 60,
    TAGS = 600, /* so many that postings are put in order now and then */
    ITEMS = 3000
};

struct walk {
    struct fixture tight; /* is trimmed, and reads its base */
    struct fixture roomy;
    struct repeatable random;
    uint32_t numbers[WORDS + FIXTURE_ITEM_WORDS]; /* of words: a forgotten one gets a new number */
    uint32_t next_number;
};

static int set_up(void **state)
{
    static struct walk walk;
    *state = &walk;
    walk.random = (struct repeatable){20};
    for (walk.next_number = 0; walk.next_number < WORDS + FIXTURE_ITEM_WORDS; walk.next_number++) {
        walk.numbers[walk.next_number] = walk.next_number;
    }
    return 0;
}

static int tear_down(void **state)
{
    struct walk *walk = *state;
    fixture_end(&walk->tight);
    fixture_end(&walk->roomy);
    return 0;
}

static void begin(struct walk *walk, const struct weights_settings *settings)
{
    struct fixture *const both[] = {&walk->tight, &walk->roomy};
    for (size_t i = 0; i < 2; i++) {
        assert_int_equal(fixture_renew(both[i], settings), 0);
        assert_int_equal(weights_reserve_tags(both[i]->weights, TAGS), 0);
    }
}

static void draw(struct walk *walk, uint32_t documents, struct fixture_item *ret_item)
{
    fixture_draw_item(&walk->random, WORDS, TAGS, documents, ret_item);
    for (size_t i = 0; i < FIXTURE_ITEM_WORDS; i++) {
        ret_item->x[i].word = walk->numbers[ret_item->x[i].word];
    }
}

static void forget_a_word(struct walk *walk)
{
    uint32_t *number = &walk->numbers[repeatable_below(&walk->random, WORDS)];
    fixture_forget(&walk->tight, *number);
    fixture_forget(&walk->roomy, *number);
    *number = walk->next_number++;
}

/* One item in five is a question about its pairs alone. */
static void learn(struct walk *walk, const struct fixture_item *item)
{
    const uint32_t denied[] = {TAGS - 1, TAGS / 2};
    const struct weights_example example = {.x = item->x,
                                            .count = FIXTURE_ITEM_WORDS,
                                            .given = item->given,
                                            .given_count = item->given_count,
                                            .pairs_alone = repeatable_below(&walk->random, 5) == 0,
                                            .denied = denied,
                                            .denied_count = 2};
    fixture_learn_example(&walk->tight, &example);
    fixture_learn_example(&walk->roomy, &example);
}

static void assert_same_scores(const struct walk *walk, const struct fixture_item *item)
{
    static float tight[TAGS];
    static float roomy[TAGS];
    for (size_t lane = 0; lane < walk->tight.lanes; lane++) {
        fixture_score_all(&walk->tight, item, (enum weights_lane)lane, TAGS, tight);
        fixture_score_all(&walk->roomy, item, (enum weights_lane)lane, TAGS, roomy);
        assert_memory_equal(tight, roomy, sizeof tight);
    }
    assert_int_equal(weights_speak(walk->tight.scratch), weights_speak(walk->roomy.scratch));
}

static void assert_same_parts(const struct walk *walk, const struct fixture_item *item)
{
    static float tight[FIXTURE_ITEM_WORDS * TAGS];
    static float roomy[FIXTURE_ITEM_WORDS * TAGS];
    static uint32_t tags[TAGS];
    for (uint32_t tag = 0; tag < TAGS; tag++) {
        tags[tag] = TAGS - 1 - tag;
    }
    fixture_explain(&walk->tight, item->x, FIXTURE_ITEM_WORDS, tags, TAGS, tight);
    fixture_explain(&walk->roomy, item->x, FIXTURE_ITEM_WORDS, tags, TAGS, roomy);
    assert_memory_equal(tight, roomy, sizeof tight);
}

/* Biases, and every chunk once both have stored all. */
static void assert_same_weights(struct walk *walk)
{
    fixture_store(&walk->tight);
    fixture_store(&walk->roomy);
    for (uint32_t tag = 0; tag < TAGS; tag++) {
        for (size_t lane = 0; lane < walk->tight.lanes; lane++) {
            struct weights_bias a = weights_bias(walk->tight.weights, (enum weights_lane)lane, tag);
            struct weights_bias b = weights_bias(walk->roomy.weights, (enum weights_lane)lane, tag);
            assert_memory_equal(&a, &b, sizeof a);
        }
    }
    const struct fake_chunks *tight = &walk->tight.stored;
    const struct fake_chunks *roomy = &walk->roomy.stored;
    assert_int_equal(tight->count, roomy->count);
    for (size_t i = 0; i < tight->count; i++) {
        assert_true(tight->list[i].key == roomy->list[i].key);
        assert_int_equal(tight->list[i].size, roomy->list[i].size);
        assert_memory_equal(tight->list[i].block + 1, roomy->list[i].block + 1,
                            tight->list[i].size);
    }
    assert_int_equal(weights_postings(walk->tight.weights), weights_postings(walk->roomy.weights));
}

/* The count of postings is that of the chunks. */
static void assert_counted(const struct walk *walk)
{
    size_t bytes = 0;
    for (size_t i = 0; i < walk->tight.stored.count; i++) {
        bytes += walk->tight.stored.list[i].size;
    }
    assert_int_equal(weights_postings(walk->tight.weights) * 4 * (1 + walk->tight.lanes), bytes);
}

static void step(struct walk *walk, uint32_t documents)
{
    struct fixture_item item;
    draw(walk, documents, &item);
    uint32_t chance = repeatable_below(&walk->random, 100);
    if (chance < 80) {
        learn(walk, &item);
    } else if (chance < 83) {
        forget_a_word(walk);
    } else if (chance < 90) {
        fixture_store(&walk->tight);
    }
    if (repeatable_below(&walk->random, 3) == 0) {
        weights_trim(walk->tight.weights, repeatable_below(&walk->random, 2) * 100000);
    }
    assert_same_scores(walk, &item);
    assert_same_parts(walk, &item);
}

static void walk_through(struct walk *walk, const struct weights_settings *settings)
{
    begin(walk, settings);
    for (uint32_t i = 1; i <= ITEMS; i++) {
        step(walk, i);
    }
    assert_true(walk->tight.stored.reads > ITEMS); /* much was let go of */
    assert_same_weights(walk);
    assert_counted(walk);
    assert_true(weights_postings(walk->tight.weights) > 1000);
}

static void one_lane_with_next_to_no_memory_is_as_good_as_with_much(void **state)
{
    const struct weights_settings settings = {.surrogate = SURROGATE_SQUARED_HINGE};
    walk_through(*state, &settings);
}

static void two_lanes_with_next_to_no_memory_are_as_good_as_with_much(void **state)
{
    const struct weights_settings settings = {.surrogate = SURROGATE_SQUARED_HINGE, .shadow = true};
    walk_through(*state, &settings);
}

/* A tag's count is a twentieth of the items when it was given last: by the time when the postings
 * of the word that all items have are put in order, it is too common for most of its tags. */
static void the_specificity_rule_needs_no_memory_either(void **state)
{
    struct walk *walk = *state;
    const struct weights_settings settings = {
        .surrogate = SURROGATE_SQUARED_HINGE, .specificity = 21.0, .shadow = true};
    walk_through(walk, &settings);
    struct weights_pruned tight = weights_pruned(walk->tight.weights);
    struct weights_pruned roomy = weights_pruned(walk->roomy.weights);
    assert_true(tight.unspecific == roomy.unspecific && tight.tiny == roomy.tiny);
    assert_true(tight.unspecific > 50);
}

int main(void)
{
#define walk_test(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)
    const struct CMUnitTest tests[] = {
        walk_test(one_lane_with_next_to_no_memory_is_as_good_as_with_much),
        walk_test(two_lanes_with_next_to_no_memory_are_as_good_as_with_much),
        walk_test(the_specificity_rule_needs_no_memory_either),
    };
    return cmocka_run_group_tests_name("weights with little memory", tests, NULL, NULL);
}
