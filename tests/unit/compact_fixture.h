/*
 * compact_fixture: weights of one word, many of them, in a given order; and examples that add one
 * more.
 *
 * The word under test is word 0, in an item of nothing else, with x = .001 or less: however heavy a
 * stored weight is (16 at most), it lifts no tag above the floor (-1 + .016 < -.98), and the bias
 * of a tag of so few items stays at 0, so that an example changes the tags that it has and nothing
 * else. What it makes, by hand: slope -4, the accumulator .1 + (.004)² ≈ .1, its rate .5/√.1 =
 * 1.581; D is about the bias's .061733, α = 2·(1 - e^(-2·.0617))/.0617 = 3.762; the weight
 * α·1.581·.001 = .00595 is 12.2 steps of a cell.
 */
#ifndef UNDERTAG_TESTS_COMPACT_FIXTURE_H
#define UNDERTAG_TESTS_COMPACT_FIXTURE_H

#include <stdlib.h>
#include <string.h>

#include "tests/unit/near.h"
#include "tests/unit/repeatable.h"
#include "tests/unit/weights_fixture.h"

enum {
    DUE = 320,   /* weights of the main lane: two chunks */
    AGAIN = 400, /* a quarter more */
    TAGS = 640,
    HEAVY = 100, /* steps of a cell */
    LEAST = 3,   /* a weight that is kept */
    TINY = 2,    /* one that is not */
    YOUNG = 9    /* items of a tag whose bias is held at 0 */
};

static const float FAINT = 0.001F;
static const float NEXT_TO_NOTHING = 0.0001F; /* makes a weight of 1.2 steps */

static const struct weights_settings ALONE = {.surrogate = SURROGATE_SQUARED_HINGE};
static const struct weights_settings WITH_SHADOW = {.surrogate = SURROGATE_SQUARED_HINGE,
                                                    .shadow = true};

/* A posting in steps of a cell; 0: no weight in that lane. */
struct posting {
    uint32_t tag;
    int main;
    int shadow;
};

struct list {
    struct posting of[TAGS];
    size_t count;
};

static inline void begin(struct fixture *fixture, const struct weights_settings *settings)
{
    assert_int_equal(fixture_renew(fixture, settings), 0);
    assert_int_equal(weights_reserve_tags(fixture->weights, TAGS), 0);
}

static inline int set_up(void **state)
{
    static struct fixture fixture;
    *state = &fixture;
    begin(&fixture, &ALONE);
    return 0;
}

/* --- what is stored of word 0 -------------------------------------------------------------------
 */

static inline uint32_t cell_of_steps(int steps)
{
    return steps == 0 ? 0 : fixture_cell((float)steps * CELL_STEP);
}

static inline void put_list(struct fixture *fixture, const struct list *list)
{
    size_t stride = 1 + fixture->lanes;
    for (size_t from = 0; from < list->count; from += POSTINGS_CHUNK) {
        uint32_t numbers[POSTINGS_MOST_NUMBERS] = {0};
        size_t left = list->count - from;
        size_t count = left < POSTINGS_CHUNK ? left : POSTINGS_CHUNK;
        for (size_t j = 0; j < count; j++) {
            const struct posting *posting = &list->of[from + j];
            numbers[j * stride] = posting->tag;
            numbers[j * stride + 1] = cell_of_steps(posting->main);
            if (fixture->lanes == WEIGHTS_LANES) {
                numbers[j * stride + 2] = cell_of_steps(posting->shadow);
            }
        }
        fake_chunks_put(&fixture->stored, 0, (uint32_t)(from / POSTINGS_CHUNK), numbers,
                        count * stride * sizeof *numbers);
    }
    weights_restore_postings(fixture->weights, list->count, (struct weights_pruned){0});
}

/* Tags 0, 1, ... of these main weights. */
static inline struct list list_of(size_t count, int main)
{
    struct list list = {.count = count};
    for (uint32_t tag = 0; tag < count; tag++) {
        list.of[tag] = (struct posting){.tag = tag, .main = main};
    }
    return list;
}

/* What is stored now, in its order. */
static inline struct list read_list(struct fixture *fixture)
{
    struct list list = {0};
    size_t stride = 1 + fixture->lanes;
    fixture_store(fixture);
    for (size_t i = 0; i < fixture->stored.count; i++) {
        const struct fake_chunk *chunk = &fixture->stored.list[i];
        uint32_t numbers[POSTINGS_MOST_NUMBERS];
        assert_true(chunk->size > 0 && chunk->size <= sizeof numbers);
        memcpy(numbers, chunk->block + 1, chunk->size);
        for (size_t j = 0; j < chunk->size / (sizeof *numbers * stride); j++) {
            const uint32_t *posting = numbers + j * stride;
            assert_true(list.count < TAGS);
            list.of[list.count++] = (struct posting){
                .tag = posting[0],
                .main = cell_weight(posting[1]),
                .shadow = fixture->lanes == WEIGHTS_LANES ? cell_weight(posting[2]) : 0};
        }
    }
    return list;
}

static inline const struct posting *find(const struct list *list, uint32_t tag)
{
    for (size_t i = 0; i < list->count; i++) {
        if (list->of[i].tag == tag) {
            return &list->of[i];
        }
    }
    return NULL;
}

static inline void assert_posting(const struct list *list, size_t at, uint32_t tag, int main)
{
    assert_int_equal(list->of[at].tag, tag);
    assert_int_equal(list->of[at].main, main);
}

/* --- an example that makes one weight -----------------------------------------------------------
 */

static inline void learn_of(struct fixture *fixture, uint32_t tag, float value)
{
    const struct weights_feature x = fixture_word(0, value);
    const struct weights_given given = {.tag = tag, .tag_count = YOUNG, .factors = {1.0, 1.0}};
    fixture_learn(fixture, &x, 1, &given, 1);
}

static inline void learn_tag(struct fixture *fixture, uint32_t tag)
{
    learn_of(fixture, tag, FAINT);
}

static inline uint64_t tiny_gone(const struct fixture *fixture)
{
    return weights_pruned(fixture->weights).tiny;
}

#endif
