/*
 * Rehearsal: whose turn it is, what learning an item once more changes, and what it leaves alone.
 */
#include "daemon/learner/model.h"

#include <errno.h>
#include <math.h>
#include <stdlib.h>

#include "tests/unit/model_fixture.h"
#include "tests/unit/model_memory.h"

enum {
    ITEMS = 40,
    MANY = 600,
    PASSES = 3 /* turns that each change brings */
};

struct desk {
    struct learner learner;
    struct memory *memory; /* what is stored, once anything is */
    struct entry entries[MANY];
    size_t count;
    struct stream stream;
};

static struct model_settings settings_of_all(void)
{
    struct model_settings settings = learner_settings();
    settings.even_out = true;
    settings.shadow = true;
    settings.step = 0.0;
    return settings;
}

static int set_up(void **state)
{
    struct desk *desk = calloc(1, sizeof *desk);
    assert_non_null(desk);
    const struct model_settings settings = settings_of_all();
    learner_renew(&desk->learner, &settings);
    desk->memory = memory_new();
    desk->stream = (struct stream){.random = {4}, .tag_count = STREAM_TAGS, .given_share = 0.8};
    *state = desk;
    return 0;
}

static int tear_down(void **state)
{
    struct desk *desk = *state;
    learner_free(&desk->learner);
    free(desk->memory);
    free(desk);
    return 0;
}

/* The next entry of the stream; its number is its place from 1 on. */
static struct entry *next_entry(struct desk *desk)
{
    struct entry *entry = &desk->entries[desk->count++];
    uint32_t truth[ENTRY_TAGS];
    assert_true(desk->count <= MANY);
    (void)stream_next(&desk->stream, entry, truth);
    entry->number = desk->count;
    return entry;
}

static void file_items(struct desk *desk, size_t count)
{
    for (size_t i = 0; i < count; i++) {
        learner_change(&desk->learner, next_entry(desk), NULL);
    }
}

/* The entry in the place of another, of other words. */
static void revise(struct desk *desk, size_t at)
{
    learner_change(&desk->learner, next_entry(desk), &desk->entries[at]);
}

static struct model_rehearsal state_of(const struct desk *desk)
{
    return model_rehearsal(desk->learner.model);
}

/* Whose turn it is; 0: nobody's. */
static uint64_t next_number(struct desk *desk)
{
    uint64_t number = 0;
    int result = model_next_rehearsal(desk->learner.model, desk->learner.base, &number);
    assert_true(result == 0 || result == -ENOENT);
    return result == 0 ? number : 0;
}

static void rehearse(struct desk *desk, uint64_t number)
{
    assert_in_range(number, 1, desk->count);
    const struct model_item item = entry_item(&desk->entries[number - 1]);
    assert_int_equal(item.number, number);
    assert_int_equal(model_rehearse(desk->learner.model, &item, desk->learner.scratch), 0);
}

/* Rehearses until there is nothing to do; how often. */
static size_t rehearse_all(struct desk *desk)
{
    size_t count = 0;
    for (uint64_t number = next_number(desk); number > 0; number = next_number(desk)) {
        rehearse(desk, number);
        count++;
        assert_true(count <= (size_t)PASSES * MANY); /* it comes to an end */
    }
    return count;
}

/* --- whose turn it is ---------------------------------------------------------------------------
 */

static void nothing_filed_is_nothing_to_rehearse(void **state)
{
    assert_int_equal(next_number(*state), 0);
}

/* Rehearses an item after the other, as many as there are. */
static void rehearse_round(struct desk *desk, uint64_t items)
{
    for (uint64_t number = 1; number <= items; number++) {
        assert_int_equal(next_number(desk), number);
        assert_int_equal(next_number(desk), number); /* to ask changes nothing */
        rehearse(desk, number);
    }
}

static void each_item_has_its_turns_by_number(void **state)
{
    struct desk *desk = *state;
    file_items(desk, ITEMS);
    for (uint64_t pass = 0; pass < PASSES; pass++) {
        rehearse_round(desk, ITEMS);
    }
    assert_int_equal(next_number(desk), 0);
    assert_int_equal(state_of(desk).items, PASSES * ITEMS);
    assert_int_equal(state_of(desk).rounds, PASSES);
}

static void what_is_due_is_told(void **state)
{
    struct desk *desk = *state;
    assert_int_equal(model_rehearsals_due(desk->learner.model), 0);
    file_items(desk, ITEMS);
    assert_int_equal(model_rehearsals_due(desk->learner.model), PASSES * ITEMS);
    rehearse(desk, next_number(desk));
    assert_int_equal(model_rehearsals_due(desk->learner.model), PASSES * ITEMS - 1);
    (void)rehearse_all(desk);
    assert_int_equal(model_rehearsals_due(desk->learner.model), 0);
}

static void a_round_is_counted_behind_its_last_item(void **state)
{
    struct desk *desk = *state;
    file_items(desk, ITEMS);
    rehearse_round(desk, ITEMS);
    assert_int_equal(state_of(desk).rounds, 0);
    assert_int_equal(next_number(desk), 1);
    assert_int_equal(state_of(desk).rounds, 1);
}

/* One that cannot be read has had its turn, too. */
static void an_item_may_be_passed_over(void **state)
{
    struct desk *desk = *state;
    file_items(desk, 3);
    for (uint64_t pass = 0; pass < PASSES; pass++) {
        rehearse_round(desk, 2);
        assert_int_equal(next_number(desk), 3);
        model_skip_rehearsal(desk->learner.model, 3);
    }
    assert_int_equal(next_number(desk), 0);
    assert_int_equal(state_of(desk).rounds, PASSES);
    assert_int_equal(state_of(desk).items, PASSES * 2);
}

/* The one filed was learned last: the three turns that it brings are those of the items learned
 * least recently. */
static void a_new_item_brings_as_many_turns_as_there_are_passes(void **state)
{
    struct desk *desk = *state;
    file_items(desk, ITEMS);
    (void)rehearse_all(desk);
    file_items(desk, 1);
    for (uint64_t number = 1; number <= PASSES; number++) {
        assert_int_equal(next_number(desk), number);
        rehearse(desk, number);
    }
    assert_int_equal(next_number(desk), 0);
}

static void what_is_filed_during_a_round_is_met_at_its_end(void **state)
{
    struct desk *desk = *state;
    file_items(desk, ITEMS);
    rehearse(desk, next_number(desk));
    file_items(desk, 4);
    for (uint64_t number = 2; number <= ITEMS + 4; number++) {
        assert_int_equal(next_number(desk), number);
        rehearse(desk, number);
    }
    assert_int_equal(next_number(desk), 1);
}

static void a_withdrawn_item_is_passed_over(void **state)
{
    struct desk *desk = *state;
    file_items(desk, ITEMS);
    learner_change(&desk->learner, NULL, &desk->entries[0]);
    learner_change(&desk->learner, NULL, &desk->entries[2]);
    learner_change(&desk->learner, NULL, &desk->entries[ITEMS - 1]);
    assert_int_equal(next_number(desk), 2);
    rehearse(desk, 2);
    assert_int_equal(next_number(desk), 4);
    for (uint64_t number = 4; number < ITEMS; number++) {
        rehearse(desk, next_number(desk));
    }
    assert_int_equal(next_number(desk), 2);
}

/* Ten of 40 are left: 30 turns, not 120. */
static void those_left_do_not_have_the_turns_of_those_withdrawn(void **state)
{
    struct desk *desk = *state;
    file_items(desk, ITEMS);
    for (size_t i = 0; i < ITEMS; i++) {
        if (i % 4 != 0) {
            learner_change(&desk->learner, NULL, &desk->entries[i]);
        }
    }
    assert_int_equal(model_rehearsals_due(desk->learner.model), PASSES * 10);
    assert_int_equal(rehearse_all(desk), PASSES * 10);
    assert_int_equal(state_of(desk).rounds, PASSES);
}

static void where_all_items_are_withdrawn_nothing_is_due(void **state)
{
    struct desk *desk = *state;
    file_items(desk, 2);
    learner_change(&desk->learner, NULL, &desk->entries[0]);
    learner_change(&desk->learner, NULL, &desk->entries[1]);
    assert_int_equal(next_number(desk), 0);
    assert_int_equal(model_rehearsals_due(desk->learner.model), 0);
}

/* Whether it had been rehearsed before it was revised, or not. */
static void a_revised_item_is_met_at_its_new_number(void **state)
{
    struct desk *desk = *state;
    file_items(desk, ITEMS);
    rehearse(desk, next_number(desk));
    rehearse(desk, next_number(desk));
    revise(desk, 0);  /* 41: was rehearsed as 1 */
    revise(desk, 10); /* 42: was not, as 11 */
    for (uint64_t number = 3; number <= ITEMS + 2; number++) {
        if (number != 11) {
            assert_int_equal(next_number(desk), number);
            rehearse(desk, number);
        }
    }
    assert_int_equal(next_number(desk), 2);
    assert_int_equal(state_of(desk).rounds, 1);
}

/* --- what it changes ----------------------------------------------------------------------------
 */

/* Score of an item's own tag as a draft: it comes nearer to 1, or stays beyond. */
static void an_item_is_learned_once_more(void **state)
{
    struct desk *desk = *state;
    file_items(desk, ITEMS);
    const struct entry *first = &desk->entries[0];
    assert_true(first->tag_count > 0);
    double before = learner_score(&desk->learner, first->text, first->tags[0]);
    assert_true(before < 1.0);
    rehearse(desk, next_number(desk));
    assert_true(learner_score(&desk->learner, first->text, first->tags[0]) > before);
}

/* Filed again, the same words and tags move the score further than rehearsed. */
static void the_step_is_smaller_than_that_of_learning(void **state)
{
    struct desk *desk = *state;
    struct entry again;
    file_items(desk, ITEMS);
    const struct entry *first = &desk->entries[0];
    double before = learner_score(&desk->learner, first->text, first->tags[0]);
    rehearse(desk, next_number(desk));
    double rehearsed = learner_score(&desk->learner, first->text, first->tags[0]) - before;
    const struct model_settings settings = settings_of_all();
    learner_renew(&desk->learner, &settings);
    for (size_t i = 0; i < ITEMS; i++) {
        learner_change(&desk->learner, &desk->entries[i], NULL);
    }
    again = *first;
    again.number = ITEMS + 1;
    learner_change(&desk->learner, &again, NULL);
    double learned = learner_score(&desk->learner, first->text, first->tags[0]) - before;
    assert_true(rehearsed > 0.0 && rehearsed < 0.75 * learned);
}

/* By pair of an entry: its score without the item's own share; NAN for a tag that is no gap. */
static void ask_honest_scores(const struct desk *desk, const struct entry *entry,
                              const struct worklist_entry *listed, double scores[WORKLIST_GAPS])
{
    const struct model_question question = filed_question(entry);
    struct model_answer answer = learner_answer(&desk->learner, &question);
    for (uint32_t i = 0; i < listed->pair_count; i++) {
        const struct model_gap *gap = find_gap(&answer, listed->pairs[i].tag);
        scores[i] = gap ? gap->score - (double)listed->pairs[i].own : (double)NAN;
    }
}

/*
 * An item that lacks a tag is a negative of it, and learning that pushes the tag's score down. What
 * is said of the item is without that share, so that it moves by the rounding of weights and by
 * what its words have shrunk alone; and what the pair was counted with stays.
 */
static void what_is_said_of_the_item_itself_hardly_moves(void **state)
{
    struct desk *desk = *state;
    size_t looked_at = 0;
    double pushed = 0.0;
    double moved = 0.0;
    file_items(desk, 200);
    for (uint64_t number = next_number(desk); number > 0; number = next_number(desk)) {
        const struct entry *entry = &desk->entries[number - 1];
        double scores[2][WORKLIST_GAPS] = {{0.0}};
        const struct worklist_entry before = learner_listed(&desk->learner, entry);
        ask_honest_scores(desk, entry, &before, scores[0]);
        rehearse(desk, number);
        const struct worklist_entry after = learner_listed(&desk->learner, entry);
        ask_honest_scores(desk, entry, &after, scores[1]);
        assert_int_equal(after.pair_count, before.pair_count);
        for (uint32_t i = 0; i < before.pair_count; i++) {
            assert_int_equal(after.pairs[i].tag, before.pairs[i].tag);
            assert_true(after.pairs[i].counted == before.pairs[i].counted);
            if (!isnan(scores[0][i]) && !isnan(scores[1][i])) {
                moved += fabs(scores[1][i] - scores[0][i]);
                pushed += (double)(before.pairs[i].own - after.pairs[i].own);
                looked_at++;
            }
        }
    }
    assert_true(looked_at > 200);
    assert_true(moved < 0.6 * pushed); /* with the share in it would move by all of that */
}

/* --- what it leaves alone -----------------------------------------------------------------------
 */

static void counts_evidence_and_the_normaliser_stay_as_they_are(void **state)
{
    struct desk *desk = *state;
    struct memory *before = memory_new();
    file_items(desk, 200);
    memory_store(desk->memory, desk->learner.model);
    learner_read(&desk->learner, &desk->memory->base);
    *before = *desk->memory;
    assert_int_equal(rehearse_all(desk), PASSES * 200);
    memory_store(desk->memory, desk->learner.model);
    for (uint32_t tag = 0; tag < MEMORY_TAGS; tag++) {
        assert_int_equal(desk->memory->tags[tag].count, before->tags[tag].count);
        assert_int_equal(desk->memory->tags[tag].unprompted, before->tags[tag].unprompted);
    }
    for (size_t i = 0; i < MEMORY_WORDS; i++) {
        assert_int_equal(desk->memory->words[i].count, before->words[i].count);
    }
    assert_memory_equal(desk->memory->figures, before->figures, sizeof before->figures);
    struct model_totals totals = desk->memory->totals;
    assert_true(totals.factor_count > 0);
    assert_true(totals.factor_sum == before->totals.factor_sum);
    assert_true(totals.factor_count == before->totals.factor_count);
    assert_int_equal(totals.documents, before->totals.documents);
    assert_true(totals.evidence_gain == before->totals.evidence_gain);
    free(before);
}

/* --- stored and restored ------------------------------------------------------------------------
 */

/* In the place of the learner, one that was put back. */
static void put_back(struct desk *desk)
{
    const struct model_settings settings = settings_of_all();
    memory_store(desk->memory, desk->learner.model);
    learner_renew(&desk->learner, &settings);
    memory_restore(desk->memory, desk->learner.model);
    learner_read(&desk->learner, &desk->memory->base);
}

static void a_round_goes_on_where_it_was_stored(void **state)
{
    struct desk *desk = *state;
    file_items(desk, ITEMS);
    for (size_t i = 0; i < 15; i++) {
        rehearse(desk, next_number(desk));
    }
    const struct model_rehearsal before = state_of(desk);
    put_back(desk);
    const struct model_rehearsal after = state_of(desk);
    assert_memory_equal(&after, &before, sizeof before);
    assert_int_equal(next_number(desk), 16);
    assert_int_equal(rehearse_all(desk), PASSES * ITEMS - 15);
    put_back(desk);
    assert_int_equal(next_number(desk), 0);
    assert_int_equal(state_of(desk).rounds, PASSES);
    assert_int_equal(state_of(desk).items, PASSES * ITEMS);
}

/* Stored after every tenth item, and in one go: the same model to the last bit. */
static void storing_it_in_between_makes_no_difference(void **state)
{
    struct desk *desk = *state;
    struct memory *whole = memory_new();
    const struct model_settings settings = settings_of_all();
    file_items(desk, 200);
    (void)rehearse_all(desk);
    memory_take(whole, desk->learner.model);
    learner_renew(&desk->learner, &settings);
    for (size_t i = 0; i < desk->count; i++) {
        learner_change(&desk->learner, &desk->entries[i], NULL);
    }
    for (uint64_t number = next_number(desk); number > 0; number = next_number(desk)) {
        if (number % 10 == 0) {
            put_back(desk);
        }
        rehearse(desk, number);
    }
    memory_store(desk->memory, desk->learner.model);
    memory_assert_same(whole, desk->memory);
    free(whole);
}

static void a_base_that_cannot_be_read_is_told(void **state)
{
    struct desk *desk = *state;
    uint64_t number = 0;
    file_items(desk, ITEMS);
    put_back(desk);
    desk->memory->refused = MEMORY_NO_ENTRY_AFTER;
    assert_int_equal(model_next_rehearsal(desk->learner.model, desk->learner.base, &number), -EIO);
    desk->memory->refused = MEMORY_NO_CHUNK;
    const struct model_item item = entry_item(&desk->entries[0]);
    assert_int_equal(model_rehearse(desk->learner.model, &item, desk->learner.scratch), -EIO);
}

/* --- never worse however long -------------------------------------------------------------------
 */

static void on_a_fixed_corpus_it_comes_to_rest(void **state)
{
    struct desk *desk = *state;
    file_items(desk, MANY);
    assert_int_equal(rehearse_all(desk), PASSES * MANY);
    memory_store(desk->memory, desk->learner.model);
    for (int call = 0; call < 50; call++) {
        assert_int_equal(rehearse_all(desk), 0);
    }
    memory_take(desk->memory, desk->learner.model);
    assert_int_equal(memory_parts_out(desk->memory), 0);
    assert_int_equal(state_of(desk).rounds, PASSES);
    assert_int_equal(state_of(desk).items, PASSES * MANY);
}

int main(void)
{
#define rehearse_test(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)
    const struct CMUnitTest tests[] = {
        rehearse_test(nothing_filed_is_nothing_to_rehearse),
        rehearse_test(each_item_has_its_turns_by_number),
        rehearse_test(what_is_due_is_told),
        rehearse_test(a_round_is_counted_behind_its_last_item),
        rehearse_test(an_item_may_be_passed_over),
        rehearse_test(a_new_item_brings_as_many_turns_as_there_are_passes),
        rehearse_test(what_is_filed_during_a_round_is_met_at_its_end),
        rehearse_test(a_withdrawn_item_is_passed_over),
        rehearse_test(those_left_do_not_have_the_turns_of_those_withdrawn),
        rehearse_test(where_all_items_are_withdrawn_nothing_is_due),
        rehearse_test(a_revised_item_is_met_at_its_new_number),
        rehearse_test(an_item_is_learned_once_more),
        rehearse_test(the_step_is_smaller_than_that_of_learning),
        rehearse_test(what_is_said_of_the_item_itself_hardly_moves),
        rehearse_test(counts_evidence_and_the_normaliser_stay_as_they_are),
        rehearse_test(a_round_goes_on_where_it_was_stored),
        rehearse_test(storing_it_in_between_makes_no_difference),
        rehearse_test(a_base_that_cannot_be_read_is_told),
        rehearse_test(on_a_fixed_corpus_it_comes_to_rest),
    };
    return cmocka_run_group_tests_name("rehearsal", tests, NULL, NULL);
}
