/*
 * weights_fixture: weights over a base of their own, with a scratch, for the tests of scoring,
 * learning and storing them.
 */
#ifndef UNDERTAG_TESTS_WEIGHTS_FIXTURE_H
#define UNDERTAG_TESTS_WEIGHTS_FIXTURE_H

#include "daemon/learner/cell.h"
#include "daemon/learner/postings.h"
#include "daemon/learner/weights.h"
#include "tests/unit/fake_base.h"
#include "tests/unit/near.h"
#include "tests/unit/repeatable.h"

enum {
    FIXTURE_TAGS = 4,
    FIXTURE_COUNT = 10 /* of each tag unless a test says otherwise: its bias may be above 0 */
};

struct fixture {
    struct weights *weights;
    struct weights_scratch *scratch;
    struct fake_chunks stored;
    size_t lanes;
    uint64_t number; /* of the next example */
};

/* The step of all examples unless a test says otherwise. */
static const double FIXTURE_STEP = 0.5;

/* What a weight may be off once it has been rounded: by less than one step of a cell. */
static const double FIXTURE_ROUNDED = (double)CELL_STEP;

static inline void fixture_end(struct fixture *fixture)
{
    weights_free(fixture->weights);
    weights_scratch_free(fixture->scratch);
    fake_chunks_deinit(&fixture->stored);
    *fixture = (struct fixture){0};
}

/* In place of whatever the fixture holds. */
static inline int fixture_renew(struct fixture *fixture, const struct weights_settings *settings)
{
    fixture_end(fixture);
    fake_chunks_init(&fixture->stored);
    fixture->lanes = settings->shadow ? WEIGHTS_LANES : 1;
    return weights_new(settings, &fixture->weights) < 0 ||
                   weights_scratch_new(&fixture->scratch) < 0 ||
                   weights_reserve_tags(fixture->weights, FIXTURE_TAGS) < 0
               ? -1
               : 0;
}

static inline int fixture_set_up(void **state)
{
    static struct fixture fixture;
    const struct weights_settings settings = {.surrogate = SURROGATE_SQUARED_HINGE};
    *state = &fixture;
    return fixture_renew(&fixture, &settings);
}

static inline int fixture_tear_down(void **state)
{
    fixture_end(*state);
    return 0;
}

/* A word that one item holds. */
static inline struct weights_feature fixture_word(uint32_t word, float value)
{
    return (struct weights_feature){.word = word, .document_count = 1, .value = value};
}

/* In both lanes alike. */
static inline struct weights_given fixture_given(uint32_t tag, double factor)
{
    return (struct weights_given){
        .tag = tag, .tag_count = FIXTURE_COUNT, .factors = {factor, factor}};
}

/* --- scores -------------------------------------------------------------------------------------
 */

static inline void fixture_score(const struct fixture *fixture, const struct weights_feature *x,
                                 size_t count)
{
    assert_int_equal(weights_score(fixture->weights, &fixture->stored.base, x, count,
                                   fixture->lanes, fixture->scratch),
                     0);
}

static inline double fixture_tag_score(const struct fixture *fixture, uint32_t tag)
{
    return (double)weights_tag_score(fixture->weights, fixture->scratch, WEIGHTS_MAIN, tag);
}

/* The score of a tag for an item of one word. */
static inline double fixture_score_of(const struct fixture *fixture, uint32_t word, uint32_t tag)
{
    struct weights_feature x = fixture_word(word, 1.0F);
    fixture_score(fixture, &x, 1);
    return fixture_tag_score(fixture, tag);
}

static inline struct weights_bias fixture_bias(const struct fixture *fixture, uint32_t tag)
{
    return weights_bias(fixture->weights, WEIGHTS_MAIN, tag);
}

static inline void fixture_explain(const struct fixture *fixture, const struct weights_feature *x,
                                   size_t count, const uint32_t *tags, size_t tag_count,
                                   float *parts)
{
    assert_int_equal(weights_explain(fixture->weights, &fixture->stored.base, x, count, tags,
                                     tag_count, fixture->scratch, parts),
                     0);
}

/* --- learning -----------------------------------------------------------------------------------
 */

/* The example's number, lanes and step are the fixture's. */
static inline void fixture_learn_example(struct fixture *fixture,
                                         const struct weights_example *wanted)
{
    struct weights_example example = *wanted;
    example.number = fixture->number++;
    example.lanes = fixture->lanes;
    example.step = FIXTURE_STEP;
    fixture_score(fixture, example.x, example.count);
    assert_int_equal(
        weights_admit(fixture->weights, &fixture->stored.base, example.x, example.count), 0);
    assert_int_equal(weights_learn(fixture->weights, &example, fixture->scratch), 0);
}

static inline void fixture_learn(struct fixture *fixture, const struct weights_feature *x,
                                 size_t count, const struct weights_given *given,
                                 size_t given_count)
{
    fixture_learn_example(fixture,
                          &(const struct weights_example){
                              .x = x, .count = count, .given = given, .given_count = given_count});
}

/* Learns an item of one word that has one tag. */
static inline void fixture_learn_one(struct fixture *fixture, uint32_t word, uint32_t tag,
                                     double factor)
{
    struct weights_feature x = fixture_word(word, 1.0F);
    struct weights_given given = fixture_given(tag, factor);
    fixture_learn(fixture, &x, 1, &given, 1);
}

/* --- what is stored -----------------------------------------------------------------------------
 */

/* A cell of a weight to the nearest step, whose accumulator is where all begin, rounded likewise.
 */
static inline uint32_t fixture_cell(float weight)
{
    uint64_t half = 1U << (CELL_FRACTION_DROPPED - 1);
    return cell_of((int16_t)lroundf(weight / CELL_STEP),
                   cell_code_accumulator(CELL_FIRST_ACCUMULATOR, half));
}

/* Stores one chunk of a word's weights, the main lane's; the shadow's cells are empty. */
static inline void fixture_put_chunk(struct fixture *fixture, uint32_t word, uint32_t number,
                                     const uint32_t *tags, const float *values, size_t count)
{
    uint32_t numbers[POSTINGS_MOST_NUMBERS] = {0};
    size_t stride = 1 + fixture->lanes;
    for (size_t i = 0; i < count; i++) {
        numbers[i * stride] = tags[i];
        numbers[i * stride + 1] = fixture_cell(values[i]);
    }
    fake_chunks_put(&fixture->stored, word, number, numbers, count * stride * sizeof *numbers);
    weights_restore_postings(fixture->weights, weights_postings(fixture->weights) + count,
                             weights_pruned(fixture->weights));
}

/* Stores one word's weights, as one chunk. */
static inline void fixture_put(struct fixture *fixture, uint32_t word, const uint32_t *tags,
                               const float *values, size_t count)
{
    fixture_put_chunk(fixture, word, 0, tags, values, count);
}

static inline void fixture_put_bias(const struct fixture *fixture, uint32_t tag, float value)
{
    assert_int_equal(weights_restore_bias(fixture->weights, WEIGHTS_MAIN, tag,
                                          (struct weights_bias){.value = value}),
                     0);
}

static inline int fixture_keep(void *user, const struct weights_chunk *chunk)
{
    fake_chunks_put(user, chunk->word, chunk->number, chunk->bytes.data, chunk->bytes.size);
    return 0;
}

/* What was never stored may be cut, too. */
static inline int fixture_cut(void *user, const struct weights_chunk *chunk)
{
    struct fake_chunks *stored = user;
    if (fake_chunks_hold(stored, chunk->word, chunk->number)) {
        fake_chunks_cut(stored, chunk->word, chunk->number, 1);
    }
    return 0;
}

/* Stores what has changed. */
static inline void fixture_store(struct fixture *fixture)
{
    assert_int_equal(weights_cut_chunks(fixture->weights, fixture_cut, &fixture->stored), 0);
    assert_int_equal(weights_changed_chunks(fixture->weights, fixture_keep, &fixture->stored), 0);
    weights_clean(fixture->weights);
}

static inline int fixture_note_tag(void *user, uint32_t tag)
{
    assert_int_equal(*(int64_t *)user, -1);
    *(int64_t *)user = tag;
    return 0;
}

/* The one tag that has changed. */
static inline int64_t fixture_changed_tag(const struct fixture *fixture)
{
    int64_t changed = -1;
    assert_int_equal(weights_changed_tags(fixture->weights, fixture_note_tag, &changed), 0);
    return changed;
}

/* Forgets a word, stored or not. */
static inline void fixture_forget(struct fixture *fixture, uint32_t word)
{
    assert_int_equal(weights_forget_word(fixture->weights, &fixture->stored.base, word), 0);
    fake_chunks_forget_word(&fixture->stored, word);
}

/* --- items by chance ----------------------------------------------------------------------------
 */

enum {
    FIXTURE_ITEM_WORDS = 8,
    FIXTURE_ITEM_TAGS = 3
};

struct fixture_item {
    struct weights_feature x[FIXTURE_ITEM_WORDS];
    struct weights_given given[FIXTURE_ITEM_TAGS];
    size_t given_count;
};

/* An item of words below `words`, which speak for tags near their own part of `tags`, low numbers
 * more often; word 0 is in all of them. `documents` is the number of the item from 1. */
static inline void fixture_draw_item(struct repeatable *random, uint32_t words, uint32_t tags,
                                     uint32_t documents, struct fixture_item *ret_item)
{
    *ret_item = (struct fixture_item){.given_count = repeatable_below(random, 4)};
    double share = repeatable_share(random);
    uint32_t topic = (uint32_t)(share * share * tags);
    for (uint32_t i = 0; i < FIXTURE_ITEM_WORDS; i++) {
        uint32_t first = topic * words / tags + repeatable_below(random, 3);
        uint32_t word = i == 0 ? 0 : 1 + (first + 5 * i) % (words - 1);
        ret_item->x[i] =
            (struct weights_feature){.word = word,
                                     .document_count = i == 0 ? documents : 1 + documents / 4,
                                     .value = 0.3535F};
        for (uint32_t k = 0; k < i; k++) { /* no word twice: the later one says nothing */
            if (ret_item->x[k].word == word) {
                ret_item->x[i].word = words + i;
            }
        }
    }
    for (uint32_t i = 0; i < ret_item->given_count; i++) {
        ret_item->given[i] =
            (struct weights_given){.tag = (topic + i) % tags,
                                   .tag_count = 1 + documents / 20,
                                   .factors = {1.0 + 4.0 * repeatable_share(random), 1.0}};
    }
}

/* Every tag's score in a lane for an item. */
static inline void fixture_score_all(const struct fixture *fixture, const struct fixture_item *item,
                                     enum weights_lane lane, size_t tags, float *ret_scores)
{
    fixture_score(fixture, item->x, FIXTURE_ITEM_WORDS);
    for (uint32_t tag = 0; tag < tags; tag++) {
        ret_scores[tag] = weights_tag_score(fixture->weights, fixture->scratch, lane, tag);
    }
}

#endif
