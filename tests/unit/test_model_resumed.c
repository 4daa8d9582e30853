/*
 * The same changes give the same model to the last bit, also when it was stored and put back in
 * between.
 */
#include "daemon/learner/model_parts.h"

#include "tests/unit/model_history.h"

/* What is stored after all the comings and goings is what the live items hold, no more. */
static void the_stored_counts_are_those_of_the_live_items(void **state)
{
    const struct history *history = *state;
    struct learner learner = {0};
    const struct model_settings settings = learner_settings();
    struct memory *memory = memory_new();
    learner_renew(&learner, &settings);
    go_on(history, 0, CHANGES, &learner, memory);
    assert_int_equal(memory->totals.documents, history->live_count);
    for (size_t i = 0; i < history->live_count; i++) {
        const struct entry *entry = history->live[i];
        for (size_t k = 0; k < entry->feature_count; k++) {
            char term[MEMORY_TERM] = "";
            memcpy(term, entry->features[k].term, entry->features[k].term_bytes);
            struct base_word word = {0};
            assert_int_equal(memory_read_word(memory, term, entry->features[k].term_bytes, &word),
                             0);
            memory->words[word.number].count--;
        }
        for (size_t k = 0; k < entry->tag_count; k++) {
            memory->tags[entry->tags[k]].count--;
            memory->tags[entry->tags[k]].unprompted--;
        }
        for (size_t k = 0; k < entry->examined_count; k++) {
            memory->tags[entry->examined[k]].unprompted++;
        }
        for (size_t k = 0; k < entry->trial_count; k++) {
            memory->tags[entry->trials[k].tag].trial_halves -= entry->trials[k].halves;
            memory->tags[entry->trials[k].tag].given_halves -= entry->trials[k].given_halves;
        }
        assert_non_null(memory_find_entry(memory, entry->number));
    }
    for (size_t w = 0; w < MEMORY_WORDS; w++) {
        assert_int_equal(memory->words[w].count, 0);
    }
    for (size_t tag = 0; tag < MEMORY_TAGS; tag++) {
        assert_int_equal(memory->tags[tag].count, 0);
        assert_int_equal(memory->tags[tag].unprompted, 0);
        assert_int_equal(memory->tags[tag].trial_halves, 0);
        assert_int_equal(memory->tags[tag].given_halves, 0);
    }
    assert_int_equal(memory->entry_count, history->live_count);
    free(memory);
    learner_free(&learner);
}

/* --- the same numbers every time ----------------------------------------------------------------
 */

static void the_same_items_give_the_same_model_whatever_the_key(void **state)
{
    const struct siphash_key other_key = {99, 1};
    const struct model_settings settings = settings_with_everything();
    struct learner one = {0};
    struct learner other = {0};
    struct memory *memory = memory_new();
    struct memory *other_memory = memory_new();
    learner_renew(&one, &settings);
    assert_int_equal(model_new(&settings, &other_key, &other.model), 0);
    assert_int_equal(model_scratch_new(&other.scratch), 0);
    go_on(*state, 0, CHANGES, &one, memory);
    go_on(*state, 0, CHANGES, &other, other_memory);
    memory_assert_same(memory, other_memory);
    assert_same_answers(&one, &other);
    free(memory);
    free(other_memory);
    learner_free(&one);
    learner_free(&other);
}

/* Stopped thirty times, put back, and gone on with. */
static void a_model_put_back_goes_on_to_the_same_numbers(void **state)
{
    enum {
        STRETCH = CHANGES / 30
    };
    const struct model_settings settings = settings_with_everything();
    struct learner whole = {0};
    struct learner stopped = {0};
    struct memory *memory = memory_new();
    struct memory *stopped_memory = memory_new();
    learner_renew(&whole, &settings);
    learner_renew(&stopped, &settings);
    go_on(*state, 0, CHANGES, &whole, memory);
    for (size_t from = 0; from < CHANGES; from += STRETCH) {
        go_on(*state, from, from + STRETCH, &stopped, stopped_memory);
        resume(stopped_memory, &settings, &stopped);
    }
    memory_assert_same(memory, stopped_memory);
    assert_same_answers(&whole, &stopped);
    free(memory);
    free(stopped_memory);
    learner_free(&whole);
    learner_free(&stopped);
}

/* Which moves the propensities without any new evidence for the chances. */
static bool takes_trials_along(const struct change *change)
{
    return !change->item && change->replaced->trial_count > 0;
}

/* Against a model of which nothing was ever said to be stored: it puts out all of it. */
static void what_was_stored_part_by_part_is_all_that_the_model_holds(void **state)
{
    const struct history *history = *state;
    const struct model_settings settings = settings_with_everything();
    struct learner stored = {0};
    struct learner other = {0};
    struct memory *memory = memory_new();
    struct memory *all = memory_new();
    learner_renew(&stored, &settings);
    learner_renew(&other, &settings);
    learner_read(&stored, &memory->base);
    for (size_t i = 0; i < CHANGES; i++) {
        learn(&stored, &history->changes[i]);
        learn(&other, &history->changes[i]);
        memory_store(memory, stored.model);
        if (i % 50 == 49 || takes_trials_along(&history->changes[i])) {
            memory_clear(all);
            memory_take(all, other.model);
            memory_assert_same(memory, all);
        }
    }
    assert_eventful(memory);
    free(memory);
    free(all);
    learner_free(&stored);
    learner_free(&other);
}

/* The scratch keeps the chances as of the empty model; they must not outlive it. */
static void a_question_before_the_model_was_put_back_spoils_no_answer(void **state)
{
    const struct model_settings settings = learner_settings();
    struct learner whole = {0};
    struct learner asked = {0};
    struct memory *memory = memory_new();
    learner_renew(&whole, &settings);
    learner_renew(&asked, &settings);
    go_on(*state, 0, 300, &whole, memory);
    (void)learner_ask(&asked, "log");
    memory_restore(memory, asked.model);
    learner_read(&asked, &memory->base);
    assert_same_answers(&whole, &asked);
    free(memory);
    learner_free(&whole);
    learner_free(&asked);
}

int main(void)
{
#define history_test(name) cmocka_unit_test_setup(name, set_up_history)
    const struct CMUnitTest tests[] = {
        history_test(the_stored_counts_are_those_of_the_live_items),
        history_test(the_same_items_give_the_same_model_whatever_the_key),
        history_test(a_model_put_back_goes_on_to_the_same_numbers),
        history_test(what_was_stored_part_by_part_is_all_that_the_model_holds),
        history_test(a_question_before_the_model_was_put_back_spoils_no_answer),
    };
    return cmocka_run_group_tests_name("stored and gone on with", tests, NULL, NULL);
}
