/*
 * model_fixture: a learner, to be taught with the entries of entries.h and asked about them.
 */
#ifndef UNDERTAG_TESTS_MODEL_FIXTURE_H
#define UNDERTAG_TESTS_MODEL_FIXTURE_H

#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/learner/model.h"
#include "tests/unit/entries.h"
#include "tests/unit/near.h"

struct learner {
    struct model *model;
    struct model_scratch *scratch;
};

static inline struct model_item entry_item(const struct entry *entry)
{
    return (struct model_item){.number = entry->number,
                               .features = entry->features,
                               .feature_count = entry->feature_count,
                               .tags = entry->tags,
                               .tag_count = entry->tag_count,
                               .examined = entry->examined,
                               .examined_count = entry->examined_count,
                               .known_not = entry->known_not,
                               .known_not_count = entry->known_not_count,
                               .checked_below = entry->checked_below,
                               .same_words = entry->same_words,
                               .trials = entry->trials,
                               .trial_count = entry->trial_count};
}

static inline struct model_settings learner_settings(void)
{
    return (struct model_settings){.weights = {.surrogate = SURROGATE_SQUARED_HINGE},
                                   .curve = propensity_curve_default(),
                                   .correction = true,
                                   .step = 0.5,
                                   .evidence_half_life_items = 50000.0};
}

static inline void learner_free(struct learner *learner)
{
    model_free(learner->model);
    model_scratch_free(learner->scratch);
    *learner = (struct learner){0};
}

/* In place of whatever the learner holds. */
static inline void learner_renew(struct learner *learner, const struct model_settings *settings)
{
    const struct siphash_key key = {7, 8};
    learner_free(learner);
    assert_int_equal(model_new(settings, &key, &learner->model), 0);
    assert_int_equal(model_scratch_new(&learner->scratch), 0);
}

static inline int learner_set_up(void **state)
{
    static struct learner learner;
    const struct model_settings settings = learner_settings();
    learner_renew(&learner, &settings);
    *state = &learner;
    return 0;
}

static inline int learner_tear_down(void **state)
{
    learner_free(*state);
    return 0;
}

/* Files (`replaced` NULL), revises or (`item` NULL) withdraws an entry. */
static inline void learner_change(const struct learner *learner, const struct entry *item,
                                  const struct entry *replaced)
{
    struct model_item new_item = item ? entry_item(item) : (struct model_item){0};
    struct model_item old_item = replaced ? entry_item(replaced) : (struct model_item){0};
    assert_int_equal(model_learn(learner->model, item ? &new_item : NULL,
                                 replaced ? &old_item : NULL, learner->scratch),
                     0);
}

static inline void learner_file(const struct learner *learner, const char *words,
                                const uint32_t *tags, size_t tag_count)
{
    struct entry entry;
    entry_set(&entry, words, tags, tag_count);
    learner_change(learner, &entry, NULL);
}

/* As learner_file, but all of the tags were prompted. */
static inline void learner_file_prompted(const struct learner *learner, const char *words,
                                         const uint32_t *tags, size_t tag_count)
{
    struct entry entry;
    entry_set(&entry, words, tags, tag_count);
    memcpy(entry.examined, entry.tags, sizeof entry.tags);
    entry.examined_count = tag_count;
    learner_change(learner, &entry, NULL);
}

/* Of a draft: every tag with whatever chance. */
static inline struct model_question entry_question(const struct entry *entry)
{
    return (struct model_question){.features = entry->features,
                                   .feature_count = entry->feature_count,
                                   .most = MODEL_MOST_GAPS};
}

static inline struct model_answer learner_answer(const struct learner *learner,
                                                 const struct model_question *question)
{
    struct model_answer answer;
    assert_int_equal(model_ask(learner->model, question, learner->scratch, &answer), 0);
    return answer;
}

/* The answer about a draft of these words. */
static inline struct model_answer learner_ask(const struct learner *learner, const char *words)
{
    struct entry entry;
    entry_set(&entry, words, NO_TAGS);
    struct model_question question = entry_question(&entry);
    return learner_answer(learner, &question);
}

/* To the last bit. */
static inline void assert_same_answer(const struct model_answer *one,
                                      const struct model_answer *other)
{
    assert_int_equal(one->gap_count, other->gap_count);
    assert_true(one->expected == other->expected);
    assert_int_equal(one->early, other->early);
    for (size_t i = 0; i < one->gap_count; i++) {
        assert_int_equal(one->gaps[i].tag, other->gaps[i].tag);
        assert_true(one->gaps[i].chance == other->gaps[i].chance);
        assert_true(one->gaps[i].score == other->gaps[i].score);
        assert_int_equal(one->gaps[i].word_count, other->gaps[i].word_count);
        for (size_t k = 0; k < one->gaps[i].word_count; k++) {
            assert_int_equal(one->gaps[i].words[k].feature, other->gaps[i].words[k].feature);
            assert_true(one->gaps[i].words[k].share == other->gaps[i].words[k].share);
        }
    }
}

static inline const struct model_gap *find_gap(const struct model_answer *answer, uint32_t tag)
{
    for (size_t i = 0; i < answer->gap_count; i++) {
        if (answer->gaps[i].tag == tag) {
            return &answer->gaps[i];
        }
    }
    return NULL;
}

/* The score of a tag for a draft of these words; the tag is known. */
static inline double learner_score(const struct learner *learner, const char *words, uint32_t tag)
{
    struct model_answer answer = learner_ask(learner, words);
    const struct model_gap *gap = find_gap(&answer, tag);
    assert_non_null(gap);
    return gap ? gap->score : 0.0;
}

static inline struct model_size learner_size(const struct learner *learner)
{
    struct model_size size;
    model_measure(learner->model, &size);
    return size;
}

/* What the reliability table says of all chances together. */
struct learner_rated {
    uint64_t shown;
    uint64_t confirmed;
    double chances; /* their sum */
};

static inline struct learner_rated learner_rated(const struct learner *learner)
{
    struct reliability_row rows[RELIABILITY_CLASSES];
    struct learner_rated sum = {0};
    standing_reliability(model_standing(learner->model), rows);
    for (size_t i = 0; i < RELIABILITY_CLASSES; i++) {
        sum.shown += rows[i].shown;
        sum.confirmed += rows[i].confirmed;
        sum.chances += rows[i].shown > 0 ? (double)rows[i].shown * rows[i].mean_chance : 0.0;
    }
    return sum;
}

/* --- the worklist -------------------------------------------------------------------------------
 */

/* What the worklist says of an entry; NULL: nothing. */
static inline const struct worklist_entry *learner_listed(const struct learner *learner,
                                                          const struct entry *entry)
{
    return worklist_find(model_worklist(learner->model), entry->number);
}

/* The pair of an entry with a tag, as it was learned; NULL: none. */
static inline const struct worklist_pair *listed_pair(const struct worklist_entry *entry,
                                                      uint32_t tag)
{
    for (uint32_t i = 0; i < entry->pair_count; i++) {
        if (entry->pairs[i].tag == tag) {
            return &entry->pairs[i];
        }
    }
    return NULL;
}

static inline const struct worklist_gap *listed_gap(const struct worklist_entry *listed,
                                                    uint32_t tag)
{
    for (uint32_t i = 0; listed && i < listed->gap_count; i++) {
        if (listed->gaps[i].tag == tag) {
            return &listed->gaps[i];
        }
    }
    return NULL;
}

/* Scores an entry again and puts it in. */
static inline void learner_rescore(const struct learner *learner, const struct entry *entry)
{
    const struct model_item item = entry_item(entry);
    struct worklist_entry listed;
    assert_int_equal(model_rescore(learner->model, &item, learner->scratch, &listed), 0);
    assert_int_equal(model_relist(learner->model, &listed), 0);
}

/* Of an entry as it is filed: what it may lack, every tag with whatever chance. */
static inline struct model_question filed_question(const struct entry *entry)
{
    return (struct model_question){.features = entry->features,
                                   .feature_count = entry->feature_count,
                                   .given = entry->tags,
                                   .given_count = entry->tag_count,
                                   .excluded = entry->known_not,
                                   .excluded_count = entry->known_not_count,
                                   .checked_below = entry->checked_below,
                                   .number = entry->number,
                                   .tagged = true,
                                   .most = MODEL_MOST_GAPS};
}

/* --- a learner that has seen a stream ---------------------------------------------------------
 */

enum {
    STREAM_TAGS = 40,
    STREAM_ITEMS = 800
};

/* A learner that has seen a stream with a fifth of its tags missing. */
static inline int stream_set_up(void **state)
{
    struct entry entry;
    uint32_t truth[ENTRY_TAGS];
    struct stream stream = {.random = {4}, .tag_count = STREAM_TAGS, .given_share = 0.8};
    (void)learner_set_up(state);
    for (int i = 0; i < STREAM_ITEMS; i++) {
        (void)stream_next(&stream, &entry, truth);
        learner_change(*state, &entry, NULL);
    }
    return 0;
}

/* Speaks for tags 3 and 9, less so for 20. */
static const char DRAFT[] = "log t3q0 t3q1 t9q1 t9q2 t20q3 n5q0 n6q0";

static inline struct model_question draft_question(struct entry *entry)
{
    entry_set(entry, DRAFT, NO_TAGS);
    return entry_question(entry);
}

#endif
