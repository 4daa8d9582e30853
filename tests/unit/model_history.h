/*
 * model_history: changes of all kinds to a few hundred items, learned by models that are compared
 * to the last bit. For cmocka tests.
 */
#ifndef UNDERTAG_TESTS_MODEL_HISTORY_H
#define UNDERTAG_TESTS_MODEL_HISTORY_H

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

static inline enum kind draw_kind(const struct history *history, struct repeatable *random)
{
    static const enum kind kinds[] = {FILING,   FILING, FILING, FILING, FILING,     FILING,
                                      REVISION, RULING, RULING, CHECK,  WITHDRAWAL, WITHDRAWAL};
    enum kind kind = kinds[repeatable_below(random, sizeof kinds / sizeof *kinds)];
    return history->live_count > 10 ? kind : FILING;
}

/* Half of the entries come with a tag that was prompted, or one that was declined. */
static inline void prompt(struct entry *entry, struct repeatable *random)
{
    uint32_t tag = repeatable_below(random, HISTORY_TAGS);
    if (entry->tag_count > 0 && repeatable_below(random, 2)) {
        entry_add_tag(entry->examined, &entry->examined_count, entry->tags[0]);
    } else if (!entry_list_holds(entry->tags, entry->tag_count, tag)) {
        entry_deny_tag(entry, tag);
    }
}

/* A tag of which nothing is known yet is found to belong or not to. */
static inline void rule(struct entry *entry, struct repeatable *random)
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
static inline void check(struct entry *entry, struct repeatable *random)
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

static inline void write_entry(struct entry *entry, enum kind kind, const struct entry *replaced,
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

static inline void write_change(struct history *history, struct stream *stream, size_t at)
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

static inline int set_up_history(void **state)
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

static inline struct model_settings settings_with_everything(void)
{
    struct model_settings settings = learner_settings();
    settings.even_out = true;
    settings.step = 0.0;
    settings.shadow = true;
    settings.evidence_half_life_items = 10.0; /* the gain is taken back to 1 now and then */
    return settings;
}

/* One change, and what is scored again after it. */
static inline void learn(const struct learner *learner, const struct change *change)
{
    learner_change(learner, change->item, change->replaced);
    if (change->rescored) {
        learner_rescore(learner, change->rescored);
    }
}

/* Changes `from` to `to`, stored every so often and at the end. */
static inline void go_on(const struct history *history, size_t from, size_t to,
                         struct learner *learner, struct memory *memory)
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
static inline void assert_same_answers(const struct learner *one, const struct learner *other)
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

/* Put back, in the place of a model that is gone. */
static inline void resume(struct memory *memory, const struct model_settings *settings,
                          struct learner *learner)
{
    learner_renew(learner, settings);
    memory_restore(memory, learner->model);
    learner_read(learner, &memory->base);
}

/* What the history must have brought about, or the tests are weaker than they say. */
static inline void assert_eventful(const struct memory *memory)
{
    double half_lives = (double)memory->totals.evidence_items / 10.0;
    assert_true(memory_find(memory, "log")->chunks[1].size > 0);
    assert_true(memory->totals.evidence_gain < exp2(half_lives - 1.0)); /* taken back to 1 */
    assert_true(memory->totals.curves_items < memory->totals.evidence_items);
    assert_true(memory->totals.fit_halves > 100);
    assert_true(memory_evidence(memory, CALIBRATORS_BINS).ruled > 1.0);
}

#endif
