/* What of the weights has changed and must be stored, and how it is put back. */
#include "daemon/learner/weights.h"

#include <errno.h>
#include <string.h>

#include "tests/unit/near.h"
#include "tests/unit/weights_fixture.h"

enum {
    MOST_CHUNKS = 8,
    MANY_TAGS = 2 * WEIGHTS_CHUNK_POSTINGS + 5
};

/* Copies of the chunks that were put out. */
struct put_out {
    size_t count;
    struct weights_chunk chunks[MOST_CHUNKS];
    uint32_t tags[MOST_CHUNKS][WEIGHTS_CHUNK_POSTINGS];
    float values[MOST_CHUNKS][WEIGHTS_CHUNK_POSTINGS];
    float accumulators[MOST_CHUNKS][WEIGHTS_CHUNK_POSTINGS];
};

static int keep(void *user, const struct weights_chunk *chunk)
{
    struct put_out *out = user;
    assert_true(out->count < MOST_CHUNKS);
    size_t at = out->count++;
    out->chunks[at] = *chunk;
    memcpy(out->tags[at], chunk->tags, chunk->count * sizeof *chunk->tags);
    memcpy(out->values[at], chunk->values, chunk->count * sizeof *chunk->values);
    memcpy(out->accumulators[at], chunk->accumulators, chunk->count * sizeof *chunk->accumulators);
    out->chunks[at].tags = out->tags[at];
    out->chunks[at].values = out->values[at];
    out->chunks[at].accumulators = out->accumulators[at];
    return 0;
}

static struct put_out *changed(const struct fixture *fixture)
{
    static struct put_out out;
    out.count = 0;
    assert_int_equal(weights_changed_chunks(fixture->weights, keep, &out), 0);
    return &out;
}

/* One word that has a weight for each of many tags. */
static void learn_many(const struct fixture *fixture)
{
    static struct weights_given given[MANY_TAGS];
    const struct weights_feature x = fixture_word(3, 1.0F);
    for (uint32_t tag = 0; tag < MANY_TAGS; tag++) {
        given[tag] = fixture_given(tag, 1.0 + tag);
    }
    assert_int_equal(weights_reserve_tags(fixture->weights, MANY_TAGS), 0);
    fixture_learn(fixture, &x, 1, given, MANY_TAGS);
}

/* --- what has changed ---------------------------------------------------------------------------
 */

static void nothing_learned_is_nothing_changed(void **state)
{
    const struct fixture *fixture = *state;
    assert_int_equal(changed(fixture)->count, 0);
    assert_int_equal(weights_changed_tags(fixture->weights)->count, 0);
}

static void an_example_changes_the_chunk_of_its_word_and_its_tag(void **state)
{
    const struct fixture *fixture = *state;
    fixture_learn_one(fixture, 3, 1, 1.0);
    const struct put_out *out = changed(fixture);
    assert_int_equal(out->count, 1);
    assert_int_equal(out->chunks[0].word, 3);
    assert_int_equal(out->chunks[0].number, 0);
    assert_int_equal(out->chunks[0].count, 1);
    assert_int_equal(out->tags[0][0], 1);
    assert_float_equal(out->accumulators[0][0], 16.0F, 1e-5F); /* slope -4 */
    const struct marks *tags = weights_changed_tags(fixture->weights);
    assert_int_equal(tags->count, 1);
    assert_int_equal(tags->list[0], 1);
}

static void what_is_stored_has_not_changed(void **state)
{
    const struct fixture *fixture = *state;
    fixture_learn_one(fixture, 3, 1, 1.0);
    weights_clean(fixture->weights);
    assert_int_equal(changed(fixture)->count, 0);
    assert_int_equal(weights_changed_tags(fixture->weights)->count, 0);
}

static void a_rival_that_lost_has_changed_too(void **state)
{
    const struct fixture *fixture = *state;
    fixture_learn_one(fixture, 3, 1, 1.0);
    fixture_learn_one(fixture, 3, 1, 9.0);
    weights_clean(fixture->weights);
    fixture_learn_one(fixture, 5, 0, 1.0); /* tag 1 is a rival by its bias */
    assert_int_equal(weights_changed_tags(fixture->weights)->count, 2);
    assert_int_equal(changed(fixture)->count, 1);
    assert_int_equal(changed(fixture)->chunks[0].word, 5);
}

static void many_weights_of_a_word_come_in_chunks(void **state)
{
    const struct fixture *fixture = *state;
    learn_many(fixture);
    const struct put_out *out = changed(fixture);
    assert_int_equal(out->count, 3);
    for (uint32_t i = 0; i < 3; i++) {
        assert_int_equal(out->chunks[i].number, i);
        assert_int_equal(out->chunks[i].count, i < 2 ? WEIGHTS_CHUNK_POSTINGS : 5);
    }
}

/* Weights of 0 for many tags, none of them a rival: a tag that is given is the only one to move. */
static void put_many_zeros(const struct fixture *fixture)
{
    uint32_t tags[MANY_TAGS];
    static const float zeros[MANY_TAGS];
    for (uint32_t i = 0; i < MANY_TAGS; i++) {
        tags[i] = i;
    }
    for (uint32_t first = 0; first < MANY_TAGS; first += WEIGHTS_CHUNK_POSTINGS) {
        uint32_t left = MANY_TAGS - first;
        struct weights_chunk chunk = {
            .word = 3,
            .number = first / WEIGHTS_CHUNK_POSTINGS,
            .count = left < WEIGHTS_CHUNK_POSTINGS ? left : WEIGHTS_CHUNK_POSTINGS,
            .tags = tags + first,
            .values = zeros,
            .accumulators = zeros};
        assert_int_equal(weights_restore_chunk(fixture->weights, &chunk), 0);
    }
}

static void a_weight_that_moves_changes_its_own_chunk_alone(void **state)
{
    const struct fixture *fixture = *state;
    put_many_zeros(fixture);
    fixture_learn_one(fixture, 3, WEIGHTS_CHUNK_POSTINGS, 1.0); /* the second chunk's first */
    const struct put_out *out = changed(fixture);
    assert_int_equal(out->count, 1);
    assert_int_equal(out->chunks[0].number, 1);
    assert_int_equal(out->tags[0][0], WEIGHTS_CHUNK_POSTINGS);
    assert_true(out->values[0][0] > 0.0F);
}

static int refuse(void *user, const struct weights_chunk *chunk)
{
    (void)chunk;
    (*(int *)user)++;
    return -ENOSPC;
}

static void whoever_stores_may_refuse(void **state)
{
    const struct fixture *fixture = *state;
    int times = 0;
    learn_many(fixture);
    assert_int_equal(weights_changed_chunks(fixture->weights, refuse, &times), -ENOSPC);
    assert_int_equal(times, 1);
    assert_int_equal(changed(fixture)->count, 3); /* all of it is still to be stored */
}

static void a_forgotten_word_has_no_chunk_to_store(void **state)
{
    const struct fixture *fixture = *state;
    fixture_learn_one(fixture, 3, 1, 1.0);
    weights_forget_word(fixture->weights, 3);
    assert_int_equal(changed(fixture)->count, 0);
    weights_clean(fixture->weights);
    fixture_learn_one(fixture, 3, 2, 1.0);
    assert_int_equal(changed(fixture)->count, 1);
    assert_int_equal(changed(fixture)->tags[0][0], 2);
}

static void the_owner_may_mark_a_tag(void **state)
{
    const struct fixture *fixture = *state;
    assert_int_equal(weights_mark_tag(fixture->weights, 2), 0);
    const struct marks *tags = weights_changed_tags(fixture->weights);
    assert_int_equal(tags->count, 1);
    assert_int_equal(tags->list[0], 2);
}

/* --- put back -----------------------------------------------------------------------------------
 */

static void what_is_put_back_scores_and_learns_as_before(void **state)
{
    struct fixture *fixture = *state;
    struct fixture other = {0};
    const struct weights_settings settings = {.surrogate = SURROGATE_SQUARED_HINGE};
    learn_many(fixture);
    assert_int_equal(fixture_renew(&other, &settings), 0);
    const struct put_out *out = changed(fixture);
    for (size_t i = 0; i < out->count; i++) {
        assert_int_equal(weights_restore_chunk(other.weights, &out->chunks[i]), 0);
    }
    for (uint32_t tag = 0; tag < MANY_TAGS; tag++) {
        struct weights_bias bias = weights_bias(fixture->weights, tag);
        assert_int_equal(weights_restore_bias(other.weights, tag, bias), 0);
    }
    assert_int_equal(weights_postings(other.weights), MANY_TAGS);
    fixture_learn_one(fixture, 3, 7, 1.0);
    fixture_learn_one(&other, 3, 7, 1.0);
    for (uint32_t tag = 0; tag < MANY_TAGS; tag++) {
        assert_true(fixture_score_of(fixture, 3, tag) == fixture_score_of(&other, 3, tag));
    }
    weights_free(other.weights);
    weights_scratch_free(other.scratch);
}

static void nothing_put_back_is_marked_as_changed(void **state)
{
    const struct fixture *fixture = *state;
    fixture_put(fixture, 3, (const uint32_t[]){0, 1}, (const float[]){0.5F, 0.5F}, 2);
    fixture_put_bias(fixture, 0, 0.5F);
    assert_int_equal(changed(fixture)->count, 0);
    assert_int_equal(weights_changed_tags(fixture->weights)->count, 0);
}

static int put_back(const struct fixture *fixture, uint32_t number, uint32_t count)
{
    static const uint32_t tags[WEIGHTS_CHUNK_POSTINGS + 1];
    static const float numbers[WEIGHTS_CHUNK_POSTINGS + 1];
    const struct weights_chunk chunk = {.word = 3,
                                        .number = number,
                                        .count = count,
                                        .tags = tags,
                                        .values = numbers,
                                        .accumulators = numbers};
    return weights_restore_chunk(fixture->weights, &chunk);
}

static void a_chunk_out_of_order_is_refused(void **state)
{
    const struct fixture *fixture = *state;
    assert_int_equal(put_back(fixture, 1, 1), -EINVAL);
    assert_int_equal(put_back(fixture, 0, WEIGHTS_CHUNK_POSTINGS), 0);
    assert_int_equal(put_back(fixture, 0, 1), -EINVAL);
    assert_int_equal(put_back(fixture, 2, 1), -EINVAL);
    assert_int_equal(put_back(fixture, 1, 10), 0);
    assert_int_equal(put_back(fixture, 2, 1), -EINVAL); /* the one before was not full */
}

/* 2^27 chunks of 160 postings are 5·2^32 postings: 0 in 32 bits. */
static void a_chunk_whose_place_cannot_be_counted_is_refused(void **state)
{
    assert_int_equal(put_back(*state, 1U << 27U, 1), -EINVAL);
}

static void a_chunk_over_the_size_is_refused(void **state)
{
    assert_int_equal(put_back(*state, 0, WEIGHTS_CHUNK_POSTINGS + 1), -EINVAL);
}

int main(void)
{
#define weights_test(name) cmocka_unit_test_setup_teardown(name, fixture_set_up, fixture_tear_down)
    const struct CMUnitTest tests[] = {
        weights_test(nothing_learned_is_nothing_changed),
        weights_test(an_example_changes_the_chunk_of_its_word_and_its_tag),
        weights_test(what_is_stored_has_not_changed),
        weights_test(a_rival_that_lost_has_changed_too),
        weights_test(many_weights_of_a_word_come_in_chunks),
        weights_test(a_weight_that_moves_changes_its_own_chunk_alone),
        weights_test(whoever_stores_may_refuse),
        weights_test(a_forgotten_word_has_no_chunk_to_store),
        weights_test(the_owner_may_mark_a_tag),
        weights_test(what_is_put_back_scores_and_learns_as_before),
        weights_test(nothing_put_back_is_marked_as_changed),
        weights_test(a_chunk_out_of_order_is_refused),
        weights_test(a_chunk_whose_place_cannot_be_counted_is_refused),
        weights_test(a_chunk_over_the_size_is_refused),
    };
    return cmocka_run_group_tests_name("storing weights", tests, NULL, NULL);
}
