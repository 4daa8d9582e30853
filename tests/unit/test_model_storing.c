/*
 * A history learned by one model that is never stored or trimmed, and by another that is stored now
 * and then, or while it goes on, and reads what it has let go: they are the same to the last bit.
 */
#include "daemon/learner/model_parts.h"

#include "tests/unit/model_history.h"

enum {
    EVERY = 6 /* is stored about that often */
};

struct pair {
    struct learner whole; /* never stored */
    struct learner other; /* stored in `memory` */
    struct memory *memory;
    struct memory *all; /* of the whole one, at the end */
};

static void pair_init(struct pair *pair, const struct model_settings *settings)
{
    *pair = (struct pair){.memory = memory_new(), .all = memory_new()};
    learner_renew(&pair->whole, settings);
    learner_renew(&pair->other, settings);
    learner_read(&pair->other, &pair->memory->base);
}

static void pair_deinit(struct pair *pair)
{
    free(pair->memory);
    free(pair->all);
    learner_free(&pair->whole);
    learner_free(&pair->other);
}

static void learn_with_both(struct pair *pair, const struct change *change)
{
    learn(&pair->whole, change);
    learn(&pair->other, change);
}

/* What is asked, listed and stored of a filed item. */
static void assert_same_of_entry(const struct pair *pair, const struct entry *entry)
{
    struct model_question question = filed_question(entry);
    struct model_answer first = learner_answer(&pair->whole, &question);
    struct model_answer second = learner_answer(&pair->other, &question);
    const struct worklist_entry listed = learner_listed(&pair->whole, entry);
    const struct worklist_entry same = learner_listed(&pair->other, entry);
    assert_same_answer(&first, &second);
    memory_assert_same_entry(&listed, &same);
}

/* All that there is, to the last bit. */
static void assert_same_models(struct pair *pair, const struct history *history)
{
    assert_same_answers(&pair->whole, &pair->other);
    assert_same_standing(&pair->whole, &pair->other);
    assert_same_ranking(&pair->whole, &pair->other);
    for (size_t i = 0; i < history->live_count; i++) {
        assert_same_of_entry(pair, history->live[i]);
    }
    memory_take(pair->all, pair->whole.model);
    memory_store(pair->memory, pair->other.model);
    memory_assert_same(pair->all, pair->memory);
}

static void a_model_stored_now_and_then_and_trimmed_each_time_is_the_same_model(void **state)
{
    const struct history *history = *state;
    const struct model_settings settings = settings_with_everything();
    struct repeatable random = {21};
    struct pair pair;
    pair_init(&pair, &settings);
    for (size_t i = 0; i < CHANGES; i++) {
        learn_with_both(&pair, &history->changes[i]);
        if (repeatable_below(&random, EVERY) == 0) {
            memory_store(pair.memory, pair.other.model);
        }
        learner_trim(&pair.other, 0, 0);
        if (i % 100 == 99) {
            assert_same_answers(&pair.whole, &pair.other);
        }
    }
    assert_true(pair.memory->read.words > CHANGES && pair.memory->read.chunks > CHANGES);
    assert_true(pair.memory->read.entries > CHANGES);
    assert_same_models(&pair, history);
    assert_eventful(pair.memory);
    pair_deinit(&pair);
}

/* What was learned since the last time that it was stored is gone with it, and is learned again. */
static void a_model_thrown_away_now_and_then_is_the_same_model(void **state)
{
    const struct history *history = *state;
    const struct model_settings settings = settings_with_everything();
    struct repeatable random = {22};
    struct pair pair;
    size_t stored = 0; /* changes that are */
    size_t thrown = 0;
    pair_init(&pair, &settings);
    memory_store(pair.memory, pair.other.model); /* there is something to begin with again */
    for (size_t i = 0; i < CHANGES; i++) {
        learn_with_both(&pair, &history->changes[i]);
        uint32_t drawn = repeatable_below(&random, 2 * EVERY);
        if (drawn < 2) {
            memory_store(pair.memory, pair.other.model);
            stored = i + 1;
        } else if (drawn == 2) {
            resume(pair.memory, &settings, &pair.other);
            thrown++;
            for (size_t again = stored; again <= i; again++) {
                learn(&pair.other, &history->changes[again]);
            }
        }
    }
    assert_true(thrown > 30);
    assert_same_models(&pair, history);
    pair_deinit(&pair);
}

/* What is on its way to the store, if anything is. */
struct passage {
    struct memory *arriving;
    bool is_begun;
    bool is_there;
    size_t lost;
};

/* Begins, ends or loses what is on its way; the model is told of the end a moment later. */
static void move_passage(struct passage *passage, struct pair *pair, uint32_t drawn)
{
    if (passage->is_there) {
        while (model_stored(pair->other.model)) {
        }
        passage->is_begun = false;
        passage->is_there = false;
    } else if (!passage->is_begun && drawn < 3) {
        memory_seal(pair->memory, passage->arriving, pair->other.model);
        passage->is_begun = true;
    } else if (passage->is_begun && drawn < 2) {
        memory_arrive(pair->memory, passage->arriving);
        passage->is_there = true;
    } else if (passage->is_begun && drawn == 2) {
        passage->is_begun = false;
        passage->lost++;
    }
}

static void a_model_that_goes_on_while_it_is_stored_is_the_same_model(void **state)
{
    const struct history *history = *state;
    const struct model_settings settings = settings_with_everything();
    struct repeatable random = {24};
    struct passage passage = {.arriving = memory_new()};
    struct pair pair;
    pair_init(&pair, &settings);
    for (size_t i = 0; i < CHANGES; i++) {
        learn_with_both(&pair, &history->changes[i]);
        move_passage(&passage, &pair, repeatable_below(&random, EVERY));
        learner_trim(&pair.other, 0, 0);
        if (i % 100 == 99) {
            assert_same_answers(&pair.whole, &pair.other);
        }
    }
    assert_true(passage.lost > 20);
    assert_true(pair.memory->read.words > CHANGES && pair.memory->read.chunks > CHANGES);
    assert_same_models(&pair, history);
    assert_eventful(pair.memory);
    pair_deinit(&pair);
    free(passage.arriving);
}

/* Learned anew are the changes behind the one that was sealed last of what has arrived. */
static void a_model_thrown_away_while_it_is_stored_is_the_same_model(void **state)
{
    const struct history *history = *state;
    const struct model_settings settings = settings_with_everything();
    struct repeatable random = {25};
    struct passage passage = {.arriving = memory_new()};
    struct pair pair;
    size_t sealed = 0; /* changes that are */
    size_t stored = 0;
    size_t thrown = 0;
    pair_init(&pair, &settings);
    memory_store(pair.memory, pair.other.model); /* there is something to begin with again */
    for (size_t i = 0; i < CHANGES; i++) {
        learn_with_both(&pair, &history->changes[i]);
        bool was_begun = passage.is_begun;
        move_passage(&passage, &pair, repeatable_below(&random, EVERY));
        sealed = passage.is_begun && !was_begun ? i + 1 : sealed;
        stored = passage.is_there ? sealed : stored;
        if (repeatable_below(&random, 3 * EVERY) == 0) {
            resume(pair.memory, &settings, &pair.other);
            passage.is_begun = passage.is_there = false;
            thrown++;
            for (size_t again = stored; again <= i; again++) {
                learn(&pair.other, &history->changes[again]);
            }
        }
    }
    assert_true(thrown > 30);
    assert_same_models(&pair, history);
    pair_deinit(&pair);
    free(passage.arriving);
}

int main(void)
{
#define history_test(name) cmocka_unit_test_setup(name, set_up_history)
    const struct CMUnitTest tests[] = {
        history_test(a_model_stored_now_and_then_and_trimmed_each_time_is_the_same_model),
        history_test(a_model_thrown_away_now_and_then_is_the_same_model),
        history_test(a_model_that_goes_on_while_it_is_stored_is_the_same_model),
        history_test(a_model_thrown_away_while_it_is_stored_is_the_same_model),
    };
    return cmocka_run_group_tests_name("stored and let go of", tests, NULL, NULL);
}
