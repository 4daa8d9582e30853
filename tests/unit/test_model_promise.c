/* What the items of the worklist promise: ranked by the tags they may lack, scored again in turn.
 */
#include "daemon/learner/model.h"

#include <errno.h>
#include <stdlib.h>

#include "tests/unit/model_fixture.h"

struct ranking {
    struct model_ranked *items;
    size_t count;
};

static struct ranking rank(const struct learner *learner, uint32_t tag, double floor)
{
    struct ranking ranking = {.items = NULL, .count = 77};
    assert_int_equal(model_rank_worklist(learner->model, learner->base, tag, floor, &ranking.items,
                                         &ranking.count),
                     0);
    return ranking;
}

/* --- which, and in what order -------------------------------------------------------------------
 */

/* Gap by gap. */
static double promise_of(const struct learner *learner, const struct worklist_entry *entry,
                         uint32_t tag, double floor)
{
    double sum = 0.0;
    for (uint32_t i = 0; i < entry->gap_count; i++) {
        double chance = model_gap_chance(learner->model, entry, &entry->gaps[i]);
        bool is_meant = tag == MODEL_ANY_TAG || tag == entry->gaps[i].tag;
        sum += is_meant && chance >= floor ? chance : 0.0;
    }
    return sum;
}

/* The next entry of the worklist, from number 0 on. */
static bool step(const struct learner *learner, struct worklist_entry *entry)
{
    int result =
        worklist_after(model_worklist(learner->model), learner->base, entry->number, entry);
    assert_true(result == 0 || result == -ENOENT);
    return result == 0;
}

static struct worklist_entry listed_at(const struct learner *learner, uint64_t number)
{
    struct worklist_entry entry = {0};
    assert_int_equal(worklist_find(model_worklist(learner->model), learner->base, number, &entry),
                     0);
    return entry;
}

/* Every item that promises something is there once, with the sum of its gaps. */
static void assert_ranked(const struct learner *learner, uint32_t tag, double floor)
{
    struct worklist_entry listed = {.number = 0};
    struct ranking ranking = rank(learner, tag, floor);
    size_t promising = 0;
    while (step(learner, &listed)) {
        promising += promise_of(learner, &listed, tag, floor) > 0.0;
    }
    assert_true(promising > 0);
    assert_int_equal(ranking.count, promising);
    for (size_t i = 0; i < ranking.count; i++) {
        const struct model_ranked *item = &ranking.items[i];
        const struct worklist_entry entry = listed_at(learner, item->number);
        assert_near(item->expected, promise_of(learner, &entry, tag, floor), 1e-12);
        assert_true(i == 0 || item->expected < item[-1].expected ||
                    (item->expected == item[-1].expected && item->number > item[-1].number));
    }
    free(ranking.items);
}

static void items_are_ranked_by_the_sum_of_their_chances(void **state)
{
    assert_ranked(*state, MODEL_ANY_TAG, 0.0);
}

static void gaps_below_the_floor_are_left_out_of_the_sum(void **state)
{
    assert_ranked(*state, MODEL_ANY_TAG, 0.1);
    assert_ranked(*state, MODEL_ANY_TAG, 0.3);
    struct ranking all = rank(*state, MODEL_ANY_TAG, 0.0);
    struct ranking likely = rank(*state, MODEL_ANY_TAG, 0.3);
    assert_true(likely.count < all.count);
    free(all.items);
    free(likely.items);
}

static void one_tag_s_gaps_alone_may_be_asked_for(void **state)
{
    assert_ranked(*state, 3, 0.0);
    assert_ranked(*state, 9, 0.1);
}

static void a_tag_that_nobody_knows_is_missing_nowhere(void **state)
{
    struct ranking ranking = rank(*state, 1000000, 0.0);
    assert_int_equal(ranking.count, 0);
    free(ranking.items);
}

static void of_equal_promises_the_older_item_comes_first(void **state)
{
    const struct learner *learner = *state;
    struct ranking before = rank(learner, MODEL_ANY_TAG, 0.0);
    struct worklist_entry best = listed_at(learner, before.items[0].number);
    for (uint64_t number = best.number + 100000; number > best.number + 99997; number--) {
        struct worklist_entry same = best;
        same.number = number;
        assert_int_equal(model_relist(learner->model, learner->base, &same), 0);
    }
    struct ranking ranking = rank(learner, MODEL_ANY_TAG, 0.0);
    assert_int_equal(ranking.count, before.count + 3);
    assert_true(ranking.items[0].number == best.number);
    for (uint64_t i = 1; i <= 3; i++) {
        assert_true(ranking.items[i].number == best.number + 99997 + i);
        assert_true(ranking.items[i].expected == ranking.items[0].expected);
    }
    free(before.items);
    free(ranking.items);
}

static void an_empty_worklist_promises_nothing(void **state)
{
    struct ranking ranking = rank(*state, MODEL_ANY_TAG, 0.0);
    assert_int_equal(ranking.count, 0);
    free(ranking.items);
}

/* Tag 0 is on one entry, and likely on the others. */
static void a_tag_that_no_item_has_any_more_is_missing_nowhere(void **state)
{
    const struct learner *learner = *state;
    struct entry tagged;
    struct entry lacking;
    entry_set(&tagged, "fog bell", TAGS(0));
    entry_set(&lacking, "fog bell", NO_TAGS);
    learner_change(learner, &tagged, NULL);
    learner_change(learner, &lacking, NULL);
    struct ranking ranking = rank(learner, 0, 0.0);
    assert_int_equal(ranking.count, 1);
    assert_true(ranking.items[0].number == lacking.number);
    free(ranking.items);
    learner_change(learner, NULL, &tagged);
    const struct worklist_entry listed = learner_listed(learner, &lacking);
    assert_near(model_gap_chance(learner->model, &listed, listed_gap(&listed, 0)), 0.0, 0.0);
    ranking = rank(learner, MODEL_ANY_TAG, 0.0);
    assert_int_equal(ranking.count, 0);
    free(ranking.items);
}

/* A gap that is not likely: other gaps have no say in its chance. */
static struct worklist_gap unlikely_gap(const struct learner *learner,
                                        struct worklist_entry *ret_entry)
{
    *ret_entry = (struct worklist_entry){.number = 0};
    while (step(learner, ret_entry)) {
        for (uint32_t g = 0; g < ret_entry->gap_count; g++) {
            double chance = model_gap_chance(learner->model, ret_entry, &ret_entry->gaps[g]);
            if (chance > 0.005 && chance < 0.02) {
                return ret_entry->gaps[g];
            }
        }
    }
    fail_msg("every gap is likely");
    return (struct worklist_gap){0};
}

/* Ten checks find its tag given wherever it belongs: less of it is missing, whatever the scores. */
static void chances_are_of_today_though_the_scores_are_not(void **state)
{
    const struct learner *learner = *state;
    struct worklist_entry entry;
    const struct worklist_gap gap = unlikely_gap(learner, &entry);
    double before = model_gap_chance(learner->model, &entry, &gap);
    for (int i = 0; i < 10; i++) {
        struct entry checked;
        entry_set(&checked, "n1q0", &gap.tag, 1);
        entry_try_tag(&checked, gap.tag, true);
        learner_change(learner, &checked, NULL);
    }
    entry = listed_at(learner, entry.number);
    const struct worklist_gap *now = listed_gap(&entry, gap.tag);
    assert_memory_equal(now, &gap, sizeof gap);
    assert_true(model_gap_chance(learner->model, &entry, now) < 0.9 * before);
}

/* --- scoring again ------------------------------------------------------------------------------
 */

/* Three items by numbers of their own; the model has come to 16 with the last, so that scores from
 * before 16 - 16/8 = 14 are stale. */
static void file_three(const struct learner *learner, struct entry entries[3])
{
    for (uint64_t i = 0; i < 3; i++) {
        entry_set(&entries[i], "fog bell", TAGS(0));
        entries[i].number = 8 + 4 * i;
        learner_change(learner, &entries[i], NULL);
    }
}

static void scores_are_stale_once_the_model_has_grown_by_an_eighth(void **state)
{
    const struct learner *learner = *state;
    struct entry entries[3];
    file_three(learner, entries);
    assert_int_equal(model_stale_below(learner->model), 14);
    assert_int_equal(learner_size(learner).listed, 3);
    assert_int_equal(learner_size(learner).stale, 2);
}

/* 0: none is left. */
static uint64_t next_stale(const struct learner *learner)
{
    uint64_t number = 0;
    int result = model_next_stale(learner->model, learner->base, &number);
    assert_true(result == 0 || result == -ENOENT);
    assert_true((number != 0) == (result == 0));
    return number;
}

static void stale_items_are_named_one_after_the_other_until_none_is_left(void **state)
{
    const struct learner *learner = *state;
    struct entry entries[3];
    file_three(learner, entries);
    uint64_t first = next_stale(learner);
    uint64_t second = next_stale(learner);
    assert_true((first == 8 && second == 12) || (first == 12 && second == 8));
    learner_rescore(learner, &entries[0]);
    assert_int_equal(learner_size(learner).stale, 1);
    assert_int_equal(next_stale(learner), 12);
    learner_rescore(learner, &entries[1]);
    assert_int_equal(next_stale(learner), 0);
    assert_int_equal(learner_listed(learner, &entries[1]).scored, 16);
}

/* The model's time is that of the greatest number, also when items leave it. */
static void a_withdrawal_makes_no_scores_stale(void **state)
{
    const struct learner *learner = *state;
    struct entry entries[3];
    file_three(learner, entries);
    learner_change(learner, NULL, &entries[2]);
    assert_int_equal(model_stale_below(learner->model), 14);
    assert_int_equal(learner_size(learner).listed, 2);
}

static void what_can_be_scored_no_more_is_taken_out(void **state)
{
    const struct learner *learner = *state;
    struct entry entries[3];
    file_three(learner, entries);
    assert_int_equal(model_delist(learner->model, learner->base, 8), 0);
    assert_int_equal(model_delist(learner->model, learner->base, 8), 0);
    assert_false(learner_lists(learner, &entries[0]));
    assert_int_equal(learner_size(learner).listed, 2);
}

int main(void)
{
#define new_test(name) cmocka_unit_test_setup_teardown(name, learner_set_up, learner_tear_down)
#define stream_test(name) cmocka_unit_test_setup_teardown(name, stream_set_up, learner_tear_down)
    const struct CMUnitTest tests[] = {
        stream_test(items_are_ranked_by_the_sum_of_their_chances),
        stream_test(gaps_below_the_floor_are_left_out_of_the_sum),
        stream_test(one_tag_s_gaps_alone_may_be_asked_for),
        stream_test(a_tag_that_nobody_knows_is_missing_nowhere),
        stream_test(of_equal_promises_the_older_item_comes_first),
        new_test(an_empty_worklist_promises_nothing),
        new_test(a_tag_that_no_item_has_any_more_is_missing_nowhere),
        stream_test(chances_are_of_today_though_the_scores_are_not),
        new_test(scores_are_stale_once_the_model_has_grown_by_an_eighth),
        new_test(stale_items_are_named_one_after_the_other_until_none_is_left),
        new_test(a_withdrawal_makes_no_scores_stale),
        new_test(what_can_be_scored_no_more_is_taken_out),
    };
    return cmocka_run_group_tests_name("promises of the worklist", tests, NULL, NULL);
}
