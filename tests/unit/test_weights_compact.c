/*
 * Compaction: when a word's postings are put in order, in which, and what is left out.
 */
#include "daemon/learner/weights.h"

#include "tests/unit/compact_fixture.h"

/* --- when it is due -----------------------------------------------------------------------------
 * A list with a tiny weight: it is gone once the list has been put in order. */

static void put_with_a_tiny_one(struct fixture *fixture, size_t count)
{
    struct list list = list_of(count, HEAVY);
    list.of[7].main = TINY;
    put_list(fixture, &list);
}

static void the_three_hundred_and_twentieth_weight_makes_it_due(void **state)
{
    struct fixture *fixture = *state;
    put_with_a_tiny_one(fixture, DUE - 2);
    learn_tag(fixture, DUE - 2);
    assert_int_equal(tiny_gone(fixture), 0);
    learn_tag(fixture, DUE - 1);
    assert_int_equal(tiny_gone(fixture), 1);
    assert_int_equal(weights_postings(fixture->weights), DUE - 1);
}

static void it_is_due_again_when_there_are_a_quarter_more(void **state)
{
    struct fixture *fixture = *state;
    put_with_a_tiny_one(fixture, DUE);
    for (uint32_t tag = DUE; tag < AGAIN - 1; tag++) {
        learn_tag(fixture, tag);
        assert_int_equal(tiny_gone(fixture), 0);
    }
    learn_tag(fixture, AGAIN - 1);
    assert_int_equal(tiny_gone(fixture), 1);
}

/* 500 comes after 400, and 499 is none of them. */
static void then_a_quarter_more_than_that(void **state)
{
    struct fixture *fixture = *state;
    put_with_a_tiny_one(fixture, 498);
    learn_tag(fixture, 498);
    assert_int_equal(tiny_gone(fixture), 0);
    learn_tag(fixture, 499);
    assert_int_equal(tiny_gone(fixture), 1);
}

/* From 319 to 322: no weight in between is passed over. */
static void several_weights_at_a_time_may_step_over_the_number(void **state)
{
    struct fixture *fixture = *state;
    const struct weights_feature x = fixture_word(0, FAINT);
    const struct weights_given given[] = {fixture_given(DUE - 1, 1.0), fixture_given(DUE, 1.0),
                                          fixture_given(DUE + 1, 1.0)};
    put_with_a_tiny_one(fixture, DUE - 1);
    fixture_learn(fixture, &x, 1, given, 3);
    assert_int_equal(tiny_gone(fixture), 1);
}

static void a_weight_that_was_there_before_makes_nothing_due(void **state)
{
    struct fixture *fixture = *state;
    put_with_a_tiny_one(fixture, DUE);
    learn_tag(fixture, 0);
    assert_int_equal(tiny_gone(fixture), 0);
    const struct list list = read_list(fixture);
    assert_true(list.of[0].main > HEAVY); /* it was learned */
    assert_int_equal(list.count, DUE);
}

/* 318 weights and 300 of the shadow alone; each new posting has a weight in both lanes. */
static void weights_of_the_shadow_alone_do_not_count(void **state)
{
    struct fixture *fixture = *state;
    begin(fixture, &WITH_SHADOW);
    struct list list = list_of(DUE + 298, HEAVY);
    for (size_t at = DUE - 2; at < list.count; at++) {
        list.of[at].main = 0;
        list.of[at].shadow = HEAVY;
    }
    list.of[7].main = TINY;
    put_list(fixture, &list);
    learn_tag(fixture, DUE + 298);
    assert_int_equal(tiny_gone(fixture), 0);
    learn_tag(fixture, DUE + 299);
    assert_int_equal(tiny_gone(fixture), 1);
}

static void a_weight_in_a_posting_of_the_shadow_counts_as_a_new_one(void **state)
{
    struct fixture *fixture = *state;
    begin(fixture, &WITH_SHADOW);
    struct list list = list_of(DUE, HEAVY);
    list.of[7].main = TINY;
    list.of[DUE - 1] = (struct posting){.tag = DUE - 1, .shadow = HEAVY};
    put_list(fixture, &list);
    learn_tag(fixture, DUE - 1);
    assert_int_equal(tiny_gone(fixture), 1);
}

/* --- the order ----------------------------------------------------------------------------------
 */

/* Tags from `first` on that fill a list up to one weight before it is due, all in a tier far below
 * those under test. */
static void fill(struct list *list, uint32_t first)
{
    while (list->count < DUE - 1) {
        list->of[list->count++] = (struct posting){.tag = first++, .main = LEAST};
    }
}

/* Tiers of steps: 1024 to 2047, 512 to 1023, 256 to 511, whatever the sign; the new weight is in
 * that of 8 to 15. */
static void heavy_tiers_come_first_and_tags_rise_in_a_tier(void **state)
{
    struct fixture *fixture = *state;
    struct list list = {.of = {{.tag = 4, .main = 511},
                               {.tag = 9, .main = 1023},
                               {.tag = 8, .main = 512},
                               {.tag = 6, .main = -1024},
                               {.tag = 5, .main = 1025},
                               {.tag = 2, .main = -600}},
                        .count = 6};
    fill(&list, 10);
    put_list(fixture, &list);
    learn_tag(fixture, TAGS - 1);
    const struct list after = read_list(fixture);
    assert_int_equal(after.count, DUE);
    assert_posting(&after, 0, 5, 1025);
    assert_posting(&after, 1, 6, -1024);
    assert_posting(&after, 2, 2, -600);
    assert_posting(&after, 3, 8, 512);
    assert_posting(&after, 4, 9, 1023);
    assert_posting(&after, 5, 4, 511);
    assert_int_equal(after.of[6].tag, TAGS - 1);
    assert_in_range(after.of[6].main, 12, 13);
    for (uint32_t at = 7; at < DUE; at++) {
        assert_posting(&after, at, 10 + at - 7, LEAST);
    }
}

static void the_shadow_has_no_say_in_the_order(void **state)
{
    struct fixture *fixture = *state;
    begin(fixture, &WITH_SHADOW);
    struct list list = {.of = {{.tag = 3, .shadow = 5000},
                               {.tag = 2, .main = HEAVY, .shadow = 5000},
                               {.tag = 1, .main = HEAVY},
                               {.tag = 0, .shadow = 9000}},
                        .count = 4};
    while (list.count < DUE + 1) { /* 319 of them have a main weight */
        list.of[list.count] = (struct posting){.tag = (uint32_t)list.count, .main = LEAST};
        list.count++;
    }
    put_list(fixture, &list);
    learn_tag(fixture, TAGS - 1);
    const struct list after = read_list(fixture);
    assert_int_equal(after.count, DUE + 2);
    assert_posting(&after, 0, 1, HEAVY);
    assert_posting(&after, 1, 2, HEAVY);
    assert_int_equal(after.of[1].shadow, 5000);
    assert_posting(&after, DUE, 0, 0); /* no weight at all: behind the others, by tag */
    assert_posting(&after, DUE + 1, 3, 0);
    assert_int_equal(after.of[DUE].shadow, 9000);
}

/* --- what is left out ---------------------------------------------------------------------------
 */

static void weights_below_three_steps_are_left_out(void **state)
{
    struct fixture *fixture = *state;
    struct list list = list_of(DUE - 1, HEAVY);
    list.of[1].main = LEAST;
    list.of[2].main = -LEAST;
    list.of[3].main = TINY;
    list.of[4].main = -TINY;
    list.of[5].main = 1;
    put_list(fixture, &list);
    learn_tag(fixture, DUE - 1);
    const struct list after = read_list(fixture);
    assert_int_equal(after.count, DUE - 3);
    assert_non_null(find(&after, 1));
    assert_non_null(find(&after, 2));
    assert_null(find(&after, 3));
    assert_null(find(&after, 4));
    assert_null(find(&after, 5));
    assert_int_equal(weights_postings(fixture->weights), DUE - 3);
    assert_int_equal(tiny_gone(fixture), 3);
    assert_int_equal(weights_pruned(fixture->weights).unspecific, 0);
}

/* A specificity of 100: a tag of c items loses a word of more than 400·c. Of a word of 4,000 items
 * tags of ten keep their weight, tags of nine do not; tag 5's weight is tiny besides. */
static void begin_with_common_word(struct fixture *fixture, struct weights_settings settings)
{
    settings.specificity = 100.0;
    begin(fixture, &settings);
    struct list list = list_of(DUE - 1, HEAVY);
    for (uint32_t tag = 0; tag < TAGS; tag++) {
        uint32_t count = tag == 3 || tag == 4 || tag == 5 ? 9 : 10;
        assert_int_equal(weights_restore_count(fixture->weights, tag, count), 0);
    }
    list.of[3].shadow = list.of[6].shadow = HEAVY;
    list.of[5].main = TINY;
    put_list(fixture, &list);
}

/* The new weight's tag has 40 items, so that the word may speak for it. */
static void learn_common_word(struct fixture *fixture, uint32_t documents)
{
    const struct weights_feature x = {.word = 0, .document_count = documents, .value = FAINT};
    const struct weights_given given = {.tag = DUE - 1, .tag_count = 41, .factors = {1.0, 1.0}};
    fixture_learn(fixture, &x, 1, &given, 1);
}

static void a_word_four_times_too_common_for_a_tag_loses_it(void **state)
{
    struct fixture *fixture = *state;
    begin_with_common_word(fixture, ALONE);
    learn_common_word(fixture, 4000);
    const struct list after = read_list(fixture);
    assert_null(find(&after, 3));
    assert_null(find(&after, 4));
    assert_null(find(&after, 5));
    assert_int_equal(after.count, DUE - 3);
    assert_int_equal(weights_pruned(fixture->weights).unspecific, 3); /* the tiny one, too */
    assert_int_equal(tiny_gone(fixture), 0);
}

/* 3,600 = 400·9. */
static void one_that_is_just_as_common_keeps_it(void **state)
{
    struct fixture *fixture = *state;
    begin_with_common_word(fixture, ALONE);
    learn_common_word(fixture, 3600);
    const struct list after = read_list(fixture);
    assert_non_null(find(&after, 3));
    assert_null(find(&after, 5));
    assert_int_equal(after.count, DUE - 1);
    assert_int_equal(weights_pruned(fixture->weights).unspecific, 0);
    assert_int_equal(tiny_gone(fixture), 1);
}

/* 41 of the new tag is what this very example says. */
static void the_count_is_that_of_the_tag_when_it_was_given_last(void **state)
{
    struct fixture *fixture = *state;
    begin_with_common_word(fixture, ALONE);
    learn_common_word(fixture, 4100);
    const struct list after = read_list(fixture);
    assert_int_equal(after.count, 1);
    assert_int_equal(after.of[0].tag, DUE - 1);
    assert_int_equal(weights_pruned(fixture->weights).unspecific, DUE - 1);
}

static void what_is_too_common_goes_from_all_lanes(void **state)
{
    struct fixture *fixture = *state;
    begin_with_common_word(fixture, WITH_SHADOW);
    learn_common_word(fixture, 4000);
    const struct list after = read_list(fixture);
    assert_null(find(&after, 3));
    assert_int_equal(find(&after, 6)->shadow, HEAVY);
    assert_int_equal(weights_pruned(fixture->weights).unspecific, 3); /* of the main lane */
}

static void tiny_weights_go_lane_by_lane(void **state)
{
    struct fixture *fixture = *state;
    begin(fixture, &WITH_SHADOW);
    struct list list = list_of(DUE - 1, HEAVY);
    list.of[1] = (struct posting){.tag = 1, .main = TINY, .shadow = HEAVY};
    list.of[2] = (struct posting){.tag = 2, .main = HEAVY, .shadow = TINY};
    list.of[3] = (struct posting){.tag = 3, .main = TINY, .shadow = TINY};
    put_list(fixture, &list);
    learn_tag(fixture, DUE - 1);
    const struct list after = read_list(fixture);
    assert_int_equal(find(&after, 1)->main, 0);
    assert_int_equal(find(&after, 1)->shadow, HEAVY);
    assert_int_equal(find(&after, 2)->main, HEAVY);
    assert_int_equal(find(&after, 2)->shadow, 0);
    assert_null(find(&after, 3));
    assert_int_equal(tiny_gone(fixture), 2); /* the main lane's */
    assert_int_equal(weights_postings(fixture->weights), DUE - 1);
}

/* --- what it means for scores and for what is stored --------------------------------------------
 */

static void the_scores_of_what_is_kept_are_the_same_to_the_last_bit(void **state)
{
    struct fixture *fixture = *state;
    struct repeatable random = {21};
    struct list list = list_of(DUE - 1, 0);
    double before[DUE - 1];
    for (size_t at = 0; at < list.count; at++) {
        int steps = 1 + (int)repeatable_below(&random, 400);
        list.of[at].main = repeatable_below(&random, 2) ? steps : -steps;
    }
    list.of[5].main = TINY;
    put_list(fixture, &list);
    for (uint32_t tag = 0; tag < DUE - 1; tag++) {
        before[tag] = fixture_score_of(fixture, 0, tag);
    }
    learn_tag(fixture, DUE - 1);
    assert_true(tiny_gone(fixture) > 0);
    for (uint32_t tag = 0; tag < DUE - 1; tag++) {
        bool is_tiny = abs(list.of[tag].main) < LEAST;
        assert_near(fixture_score_of(fixture, 0, tag), is_tiny ? -1.0 : before[tag], 0.0);
    }
}

/* 320 postings in two chunks; 170 and the new one need two, 100 and the new one need one. */
static void chunks_that_are_not_needed_any_more_are_cut_from_the_base(void **state)
{
    static const size_t KEPT[] = {170, 100};
    struct fixture *fixture = *state;
    for (size_t i = 0; i < 2; i++) {
        begin(fixture, &ALONE);
        struct list list = list_of(DUE - 1, TINY);
        for (size_t at = 0; at < KEPT[i]; at++) {
            list.of[2 * at % (DUE - 1)].main = HEAVY;
        }
        put_list(fixture, &list);
        assert_true(fake_chunks_hold(&fixture->stored, 0, 1));
        learn_tag(fixture, DUE - 1);
        assert_int_equal(read_list(fixture).count, KEPT[i] + 1);
        assert_int_equal(fake_chunks_hold(&fixture->stored, 0, 1), i == 0);
        weights_trim(fixture->weights, 0); /* what it reads now is what is stored */
        assert_near(fixture_score_of(fixture, 0, 2), -1.0 + HEAVY * (double)CELL_STEP, 0.0);
    }
}

static void a_word_that_loses_everything_may_begin_again(void **state)
{
    struct fixture *fixture = *state;
    const struct list list = list_of(DUE - 1, TINY);
    put_list(fixture, &list);
    learn_of(fixture, DUE - 1, NEXT_TO_NOTHING);
    assert_int_equal(weights_postings(fixture->weights), 0);
    assert_int_equal(tiny_gone(fixture), DUE);
    assert_near(fixture_score_of(fixture, 0, 0), -1.0, 0.0);
    assert_int_equal(read_list(fixture).count, 0);
    assert_int_equal(fixture->stored.count, 0);
    learn_tag(fixture, 0);
    assert_int_equal(weights_postings(fixture->weights), 1);
    assert_int_equal(read_list(fixture).count, 1);
}

/* --- many items ---------------------------------------------------------------------------------
 */

/* Word 0 is in all items and speaks for some 500 tags; 80 times too common is too common. */
static void learn_items(struct fixture *fixture, const struct weights_settings *settings)
{
    struct repeatable random = {8};
    begin(fixture, settings);
    for (uint32_t i = 1; i <= 3000; i++) {
        struct fixture_item item;
        fixture_draw_item(&random, 200, TAGS, i, &item);
        fixture_learn(fixture, item.x, FIXTURE_ITEM_WORDS, item.given, item.given_count);
        if (i % 500 == 0) {
            fixture_store(fixture);
            weights_trim(fixture->weights, 0);
        }
    }
}

static void the_main_lane_is_the_same_with_a_shadow_and_without(void **state)
{
    static struct fixture other;
    struct fixture *fixture = *state;
    struct weights_settings settings = {.surrogate = SURROGATE_SQUARED_HINGE, .specificity = 20.0};
    struct repeatable random = {9};
    learn_items(fixture, &settings);
    settings.shadow = true;
    learn_items(&other, &settings);
    for (uint32_t i = 1; i <= 200; i++) {
        struct fixture_item item;
        float scores[TAGS];
        float others[TAGS];
        fixture_draw_item(&random, 200, TAGS, i, &item);
        fixture_score_all(fixture, &item, WEIGHTS_MAIN, TAGS, scores);
        fixture_score_all(&other, &item, WEIGHTS_MAIN, TAGS, others);
        assert_memory_equal(scores, others, sizeof scores);
    }
    const struct weights_pruned pruned = weights_pruned(fixture->weights);
    const struct weights_pruned same = weights_pruned(other.weights);
    assert_memory_equal(&pruned, &same, sizeof pruned);
    assert_true(pruned.unspecific > 0 && pruned.tiny > 0);
    fixture_end(&other);
}

int main(void)
{
#define compact_test(name) cmocka_unit_test_setup_teardown(name, set_up, fixture_tear_down)
    const struct CMUnitTest tests[] = {
        compact_test(the_three_hundred_and_twentieth_weight_makes_it_due),
        compact_test(it_is_due_again_when_there_are_a_quarter_more),
        compact_test(then_a_quarter_more_than_that),
        compact_test(several_weights_at_a_time_may_step_over_the_number),
        compact_test(a_weight_that_was_there_before_makes_nothing_due),
        compact_test(weights_of_the_shadow_alone_do_not_count),
        compact_test(a_weight_in_a_posting_of_the_shadow_counts_as_a_new_one),
        compact_test(heavy_tiers_come_first_and_tags_rise_in_a_tier),
        compact_test(the_shadow_has_no_say_in_the_order),
        compact_test(weights_below_three_steps_are_left_out),
        compact_test(a_word_four_times_too_common_for_a_tag_loses_it),
        compact_test(one_that_is_just_as_common_keeps_it),
        compact_test(the_count_is_that_of_the_tag_when_it_was_given_last),
        compact_test(what_is_too_common_goes_from_all_lanes),
        compact_test(tiny_weights_go_lane_by_lane),
        compact_test(the_scores_of_what_is_kept_are_the_same_to_the_last_bit),
        compact_test(chunks_that_are_not_needed_any_more_are_cut_from_the_base),
        compact_test(a_word_that_loses_everything_may_begin_again),
        compact_test(the_main_lane_is_the_same_with_a_shadow_and_without),
    };
    return cmocka_run_group_tests_name("compaction", tests, NULL, NULL);
}
