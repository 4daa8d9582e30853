/*
 * weights_fixture: weights with a scratch, for the tests of scoring, learning and storing them.
 */
#ifndef UNDERTAG_TESTS_WEIGHTS_FIXTURE_H
#define UNDERTAG_TESTS_WEIGHTS_FIXTURE_H

#include "daemon/learner/weights.h"
#include "tests/unit/near.h"

enum {
    FIXTURE_TAGS = 4,
    FIXTURE_COUNT = 10 /* of each tag unless a test says otherwise: its bias may be above 0 */
};

struct fixture {
    struct weights *weights;
    struct weights_scratch *scratch;
};

/* The step of all examples unless a test says otherwise. */
static const double FIXTURE_STEP = 0.5;

/* In place of whatever the fixture holds. */
static inline int fixture_renew(struct fixture *fixture, const struct weights_settings *settings)
{
    weights_free(fixture->weights);
    weights_scratch_free(fixture->scratch);
    *fixture = (struct fixture){0};
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
    struct fixture *fixture = *state;
    weights_free(fixture->weights);
    weights_scratch_free(fixture->scratch);
    *fixture = (struct fixture){0};
    return 0;
}

/* A word that one item holds. */
static inline struct weights_feature fixture_word(uint32_t word, float value)
{
    return (struct weights_feature){.word = word, .document_count = 1, .value = value};
}

static inline struct weights_given fixture_given(uint32_t tag, double factor)
{
    return (struct weights_given){.tag = tag, .tag_count = FIXTURE_COUNT, .factor = factor};
}

static inline void fixture_score(const struct fixture *fixture, const struct weights_feature *x,
                                 size_t count)
{
    assert_int_equal(weights_score(fixture->weights, x, count, fixture->scratch), 0);
}

static inline double fixture_tag_score(const struct fixture *fixture, uint32_t tag)
{
    return (double)weights_tag_score(fixture->weights, fixture->scratch, tag);
}

/* The score of a tag for an item of one word. */
static inline double fixture_score_of(const struct fixture *fixture, uint32_t word, uint32_t tag)
{
    struct weights_feature x = fixture_word(word, 1.0F);
    fixture_score(fixture, &x, 1);
    return fixture_tag_score(fixture, tag);
}

static inline void fixture_learn(const struct fixture *fixture, const struct weights_feature *x,
                                 size_t count, const struct weights_given *given,
                                 size_t given_count)
{
    fixture_score(fixture, x, count);
    assert_int_equal(weights_learn(fixture->weights,
                                   &(const struct weights_example){.x = x,
                                                                   .count = count,
                                                                   .given = given,
                                                                   .given_count = given_count,
                                                                   .step = FIXTURE_STEP},
                                   fixture->scratch),
                     0);
}

/* Learns an item of one word that has one tag. */
static inline void fixture_learn_one(const struct fixture *fixture, uint32_t word, uint32_t tag,
                                     double factor)
{
    struct weights_feature x = fixture_word(word, 1.0F);
    struct weights_given given = fixture_given(tag, factor);
    fixture_learn(fixture, &x, 1, &given, 1);
}

/* Puts back one word's weights, as one chunk whose accumulators are 0. */
static inline void fixture_put(const struct fixture *fixture, uint32_t word, const uint32_t *tags,
                               const float *values, uint32_t count)
{
    static const float accumulators[WEIGHTS_CHUNK_POSTINGS] = {0};
    struct weights_chunk chunk = {
        .word = word, .count = count, .tags = tags, .values = values, .accumulators = accumulators};
    assert_int_equal(weights_restore_chunk(fixture->weights, &chunk), 0);
}

static inline void fixture_put_bias(const struct fixture *fixture, uint32_t tag, float value)
{
    assert_int_equal(
        weights_restore_bias(fixture->weights, tag, (struct weights_bias){.value = value}), 0);
}

#endif
