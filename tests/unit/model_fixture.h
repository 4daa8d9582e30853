/*
 * model_fixture: a learner, to be taught with the entries of entries.h and asked about them.
 */
#ifndef UNDERTAG_TESTS_MODEL_FIXTURE_H
#define UNDERTAG_TESTS_MODEL_FIXTURE_H

#include <errno.h>
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/learner/cell.h"
#include "daemon/learner/model.h"
#include "tests/unit/entries.h"
#include "tests/unit/near.h"

struct learner {
    struct model *model;
    struct model_scratch *scratch;
    const struct base *base; /* what is stored; NULL: nothing */
};

/*
 * A weight is a whole number of steps (cell.h), and each time that an item moves it it is rounded
 * up or down, by less than a step. A score is the sum of w·x over n words with Σx² = 1, so that
 * Σx ≤ √n: learning an item of n words moves a score by what it should but for less than so much.
 */
static inline double rounding_of_words(size_t count)
{
    return (double)CELL_STEP * sqrt((double)count);
}

/* Of an entry of one word, learned once. */
#define ONE_ROUNDING ((double)CELL_STEP)

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

/* Whatever the learner has not in memory it reads there from now on. */
static inline void learner_read(struct learner *learner, const struct base *base)
{
    learner->base = base;
    model_scratch_read(learner->scratch, base);
}

/* Lets go of words and weights down to these bytes. One call of model_trim may stop before it has
 * come so far; as few as a test has it has gone round in these. */
static inline void learner_trim(const struct learner *learner, uint64_t dictionary_most,
                                uint64_t weights_most)
{
    for (int i = 0; i < 12; i++) {
        model_trim(learner->model, dictionary_most, weights_most);
    }
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

static inline void assert_same_standing(const struct learner *one, const struct learner *other)
{
    struct standing_answer answers[2];
    memset(answers, 0, sizeof answers); /* padding, too */
    standing_ask(model_standing(one->model), 0, &answers[0]);
    standing_ask(model_standing(other->model), 0, &answers[1]);
    assert_memory_equal(&answers[1], &answers[0], sizeof answers[0]);
}

/* Of a worklist that promises something. */
static inline void assert_same_ranking(const struct learner *one, const struct learner *other)
{
    const struct learner *const learners[] = {one, other};
    struct model_ranked *ranked[2] = {NULL, NULL};
    size_t counts[2] = {0, 0};
    for (size_t i = 0; i < 2; i++) {
        assert_int_equal(model_rank_worklist(learners[i]->model, learners[i]->base, MODEL_ANY_TAG,
                                             0.0, &ranked[i], &counts[i]),
                         0);
    }
    assert_true(counts[0] > 0);
    assert_int_equal(counts[1], counts[0]);
    assert_memory_equal(ranked[1], ranked[0], counts[0] * sizeof *ranked[0]);
    free(ranked[0]);
    free(ranked[1]);
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

/* Whether the worklist has an entry, and what it says. */
static inline bool learner_find_listed(const struct learner *learner, const struct entry *entry,
                                       struct worklist_entry *ret_listed)
{
    int result =
        worklist_find(model_worklist(learner->model), learner->base, entry->number, ret_listed);
    assert_true(result == 0 || result == -ENOENT);
    return result == 0;
}

static inline bool learner_lists(const struct learner *learner, const struct entry *entry)
{
    struct worklist_entry listed;
    return learner_find_listed(learner, entry, &listed);
}

/* What the worklist says of an entry that it has. */
static inline struct worklist_entry learner_listed(const struct learner *learner,
                                                   const struct entry *entry)
{
    struct worklist_entry listed = {0};
    assert_true(learner_find_listed(learner, entry, &listed));
    return listed;
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
    for (uint32_t i = 0; i < listed->gap_count; i++) {
        if (listed->gaps[i].tag == tag) {
            return &listed->gaps[i];
        }
    }
    return NULL;
}

/* Whether the worklist says that an entry, which it has, may lack a tag. */
static inline bool learner_lists_gap(const struct learner *learner, const struct entry *entry,
                                     uint32_t tag)
{
    const struct worklist_entry listed = learner_listed(learner, entry);
    return listed_gap(&listed, tag) != NULL;
}

/* Scores an entry again and puts it in. */
static inline void learner_rescore(const struct learner *learner, const struct entry *entry)
{
    const struct model_item item = entry_item(entry);
    struct worklist_entry listed;
    assert_int_equal(model_rescore(learner->model, &item, learner->scratch, &listed), 0);
    assert_int_equal(model_relist(learner->model, learner->base, &listed), 0);
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
