/*
 * The same changes give the same model to the last bit, also when it was stored and put back in
 * between.
 */
#include "daemon/learner/model_parts.h"

#include "tests/unit/model_fixture.h"
#include "tests/unit/model_memory.h"

enum {
    HISTORY_TAGS = 200, /* the word "log" has more than a chunk of weights */
    CHANGES = 900,
    STORE_EVERY = 37,
    QUESTIONS = 20
};

/* --- a history ----------------------------------------------------------------------------------
 * Items filed (some of them prompted), revised, ruled on, checked and withdrawn, and items of the
 * worklist scored again; the same for every learner. */

struct change {
    const struct entry *item;
    const struct entry *replaced;
    const struct entry *rescored; /* after it; or NULL */
};

struct history {
    struct entry entries[CHANGES];
    struct change changes[CHANGES];
    const struct entry *live[CHANGES];
    size_t live_count;
};

enum kind {
    FILING,
    REVISION,
    RULING,
    CHECK,
    WITHDRAWAL
};

static enum kind draw_kind(const struct history *history, struct repeatable *random)
{
    static const enum kind kinds[] = {FILING,   FILING, FILING, FILING, FILING,     FILING,
                                      REVISION, RULING, RULING, CHECK,  WITHDRAWAL, WITHDRAWAL};
    enum kind kind = kinds[repeatable_below(random, sizeof kinds / sizeof *kinds)];
    return history->live_count > 10 ? kind : FILING;
}

/* Half of the entries come with a tag that was prompted, or one that was declined. */
static void prompt(struct entry *entry, struct repeatable *random)
{
    uint32_t tag = repeatable_below(random, HISTORY_TAGS);
    if (entry->tag_count > 0 && repeatable_below(random, 2)) {
        entry_add_tag(entry->examined, &entry->examined_count, entry->tags[0]);
    } else if (!entry_list_holds(entry->tags, entry->tag_count, tag)) {
        entry_deny_tag(entry, tag);
    }
}

/* A tag of which nothing is known yet is found to belong or not to. */
static void rule(struct entry *entry, struct repeatable *random)
{
    uint32_t tag = repeatable_below(random, HISTORY_TAGS);
    if (entry_list_holds(entry->tags, entry->tag_count, tag) ||
        entry_list_holds(entry->known_not, entry->known_not_count, tag)) {
        return;
    }
    if (entry->tag_count < ENTRY_TAGS && repeatable_below(random, 2)) {
        entry_find_tag(entry, tag);
    } else if (entry->known_not_count < ENTRY_TAGS) {
        entry_deny_tag(entry, tag);
    }
}

/* At random: what belongs was given, but for what is found. */
static void check(struct entry *entry, struct repeatable *random)
{
    if (entry->checked_below > 0) {
        return;
    }
    entry->checked_below = HISTORY_TAGS;
    for (size_t i = 0; i < entry->tag_count; i++) {
        entry_try_tag(entry, entry->tags[i], true);
    }
    size_t before = entry->tag_count;
    rule(entry, random);
    if (entry->tag_count > before && entry->trial_count < ENTRY_TAGS) {
        entry_try_tag(entry, entry->examined[entry->examined_count - 1], false);
    }
}

static void write_entry(struct entry *entry, enum kind kind, const struct entry *replaced,
                        struct stream *stream)
{
    uint32_t truth[ENTRY_TAGS];
    if (kind == FILING || kind == REVISION) {
        (void)stream_next(stream, entry, truth);
        prompt(entry, &stream->random);
        return;
    }
    entry_follow(entry, replaced);
    if (kind == RULING) {
        rule(entry, &stream->random);
    } else {
        check(entry, &stream->random);
    }
}

static void write_change(struct history *history, struct stream *stream, size_t at)
{
    struct change *change = &history->changes[at];
    enum kind kind = draw_kind(history, &stream->random);
    size_t which = history->live_count;
    if (kind == FILING) {
        history->live_count++;
    } else {
        which = repeatable_below(&stream->random, (uint32_t)history->live_count);
        change->replaced = history->live[which];
    }
    if (kind == WITHDRAWAL) {
        history->live[which] = history->live[--history->live_count];
    } else {
        write_entry(&history->entries[at], kind, change->replaced, stream);
        change->item = &history->entries[at];
        history->live[which] = change->item;
    }
    if (at % 3 == 0) {
        change->rescored =
            history->live[repeatable_below(&stream->random, (uint32_t)history->live_count)];
    }
}

static int set_up(void **state)
{
    static struct history history;
    struct stream stream = {.random = {12}, .tag_count = HISTORY_TAGS, .given_share = 0.8};
    memset(&history, 0, sizeof history);
    for (size_t i = 0; i < CHANGES; i++) {
        write_change(&history, &stream, i);
    }
    *state = &history;
    return 0;
}

static struct model_settings settings_with_everything(void)
{
    struct model_settings settings = learner_settings();
    settings.even_out = true;
    settings.step = 0.0;
    settings.shadow = true;
    settings.evidence_half_life_items = 10.0; /* the gain is taken back to 1 now and then */
    return settings;
}

/* One change, and what is scored again after it. */
static void learn(const struct learner *learner, const struct change *change)
{
    learner_change(learner, change->item, change->replaced);
    if (change->rescored) {
        learner_rescore(learner, change->rescored);
    }
}

/* Changes `from` to `to`, stored every so often and at the end. */
static void go_on(const struct history *history, size_t from, size_t to, struct learner *learner,
                  struct memory *memory)
{
    learner_read(learner, &memory->base);
    for (size_t i = from; i < to; i++) {
        learn(learner, &history->changes[i]);
        if (i % STORE_EVERY == 0) {
            memory_store(memory, learner->model);
        }
    }
    memory_store(memory, learner->model);
}

/* Drafts and filed items alike, to the last bit. */
static void assert_same_answers(const struct learner *one, const struct learner *other)
{
    struct stream stream = {.random = {13}, .tag_count = HISTORY_TAGS, .given_share = 0.5};
    struct entry entry;
    uint32_t truth[ENTRY_TAGS];
    for (int i = 0; i < QUESTIONS; i++) {
        (void)stream_next(&stream, &entry, truth);
        struct model_question question = entry_question(&entry);
        question.tagged = i % 2 != 0;
        question.given = entry.tags;
        question.given_count = entry.tag_count;
        question.why = true;
        struct model_answer first = learner_answer(one, &question);
        struct model_answer second = learner_answer(other, &question);
        assert_same_answer(&first, &second);
    }
}

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

/* Put back, in the place of a model that is gone. */
static void resume(struct memory *memory, const struct model_settings *settings,
                   struct learner *learner)
{
    learner_renew(learner, settings);
    memory_restore(memory, learner->model);
    learner_read(learner, &memory->base);
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

/* What the history must have brought about, or the tests are weaker than they say. */
static void assert_eventful(const struct memory *memory)
{
    double half_lives = (double)memory->totals.evidence_items / 10.0;
    assert_true(memory_find(memory, "log")->chunks[1].size > 0);
    assert_true(memory->totals.evidence_gain < exp2(half_lives - 1.0)); /* taken back to 1 */
    assert_true(memory->totals.curves_items < memory->totals.evidence_items);
    assert_true(memory->totals.fit_halves > 100);
    assert_true(memory_evidence(memory, CALIBRATORS_BINS).ruled > 1.0);
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

/* --- what is in memory and what is not ----------------------------------------------------------
 * A history learned by one model that is never stored or trimmed, and by another that reads what it
 * has let go. */

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
#define history_test(name) cmocka_unit_test_setup(name, set_up)
    const struct CMUnitTest tests[] = {
        history_test(the_stored_counts_are_those_of_the_live_items),
        history_test(the_same_items_give_the_same_model_whatever_the_key),
        history_test(a_model_put_back_goes_on_to_the_same_numbers),
        history_test(what_was_stored_part_by_part_is_all_that_the_model_holds),
        history_test(a_model_stored_now_and_then_and_trimmed_each_time_is_the_same_model),
        history_test(a_model_thrown_away_now_and_then_is_the_same_model),
        history_test(a_question_before_the_model_was_put_back_spoils_no_answer),
    };
    return cmocka_run_group_tests_name("stored and gone on with", tests, NULL, NULL);
}
