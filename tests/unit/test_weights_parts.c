/* What of the weights has changed and must be stored, and how it is put back. */
#include "daemon/learner/weights.h"

#include <errno.h>
#include <string.h>

#include "tests/unit/near.h"
#include "tests/unit/weights_fixture.h"

enum {
    MOST_CHUNKS = 8,
    MANY_TAGS = 2 * POSTINGS_CHUNK + 5,
    POSTING_BYTES = 8 /* of one lane */
};

/* Copies of the chunks that were put out. */
struct put_out {
    size_t count;
    struct weights_chunk chunks[MOST_CHUNKS];
    uint32_t numbers[MOST_CHUNKS][POSTINGS_MOST_NUMBERS];
};

static int keep(void *user, const struct weights_chunk *chunk)
{
    struct put_out *out = user;
    assert_true(out->count < MOST_CHUNKS);
    size_t at = out->count++;
    out->chunks[at] = *chunk;
    assert_true(chunk->bytes.size <= sizeof out->numbers[at]);
    memcpy(out->numbers[at], chunk->bytes.data, chunk->bytes.size);
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
static void learn_many(struct fixture *fixture)
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
    assert_int_equal(weights_changed_tag_count(fixture->weights), 0);
}

/* Slope -4: the accumulator is .1 + 16, and of 16 to 32 a cell can say every 64th. */
static void an_example_changes_the_chunk_of_its_word_and_its_tag(void **state)
{
    struct fixture *fixture = *state;
    fixture_learn_one(fixture, 3, 1, 1.0);
    const struct put_out *out = changed(fixture);
    assert_int_equal(out->count, 1);
    assert_int_equal(out->chunks[0].word, 3);
    assert_int_equal(out->chunks[0].number, 0);
    assert_int_equal(out->chunks[0].bytes.size, POSTING_BYTES);
    assert_int_equal(out->numbers[0][0], 1);
    assert_near((double)cell_accumulator(out->numbers[0][1]), 16.1, 1.0 / 64.0);
    assert_int_equal(fixture_changed_tag(fixture), 1);
}

static void what_is_stored_has_not_changed(void **state)
{
    struct fixture *fixture = *state;
    fixture_learn_one(fixture, 3, 1, 1.0);
    weights_clean(fixture->weights);
    assert_int_equal(changed(fixture)->count, 0);
    assert_int_equal(weights_changed_tag_count(fixture->weights), 0);
}

static void a_rival_that_lost_has_changed_too(void **state)
{
    struct fixture *fixture = *state;
    fixture_learn_one(fixture, 3, 1, 1.0);
    fixture_learn_one(fixture, 3, 1, 9.0);
    weights_clean(fixture->weights);
    fixture_learn_one(fixture, 5, 0, 1.0); /* tag 1 is a rival by its bias */
    assert_int_equal(weights_changed_tag_count(fixture->weights), 2);
    assert_int_equal(changed(fixture)->count, 1);
    assert_int_equal(changed(fixture)->chunks[0].word, 5);
}

static void many_weights_of_a_word_come_in_chunks(void **state)
{
    struct fixture *fixture = *state;
    learn_many(fixture);
    const struct put_out *out = changed(fixture);
    assert_int_equal(out->count, 3);
    for (uint32_t i = 0; i < 3; i++) {
        assert_int_equal(out->chunks[i].number, i);
        assert_int_equal(out->chunks[i].bytes.size, POSTING_BYTES * (i < 2 ? POSTINGS_CHUNK : 5));
    }
}

/* Weights of 0 for many tags, none of them a rival: a tag that is given is the only one to move. */
static void put_many_zeros(struct fixture *fixture)
{
    uint32_t tags[MANY_TAGS];
    static const float zeros[MANY_TAGS];
    for (uint32_t i = 0; i < MANY_TAGS; i++) {
        tags[i] = i;
    }
    assert_int_equal(weights_reserve_tags(fixture->weights, MANY_TAGS), 0);
    for (uint32_t first = 0; first < MANY_TAGS; first += POSTINGS_CHUNK) {
        uint32_t left = MANY_TAGS - first;
        fixture_put_chunk(fixture, 3, first / POSTINGS_CHUNK, tags + first, zeros,
                          left < POSTINGS_CHUNK ? left : POSTINGS_CHUNK);
    }
}

static void a_weight_that_moves_changes_its_own_chunk_alone(void **state)
{
    struct fixture *fixture = *state;
    put_many_zeros(fixture);
    fixture_learn_one(fixture, 3, POSTINGS_CHUNK, 1.0); /* the second chunk's first */
    const struct put_out *out = changed(fixture);
    assert_int_equal(out->count, 1);
    assert_int_equal(out->chunks[0].number, 1);
    assert_int_equal(out->chunks[0].bytes.size, POSTING_BYTES * POSTINGS_CHUNK);
    assert_int_equal(out->numbers[0][0], POSTINGS_CHUNK);
    assert_true(cell_weight(out->numbers[0][1]) > 0);
    assert_int_equal(weights_postings(fixture->weights), MANY_TAGS); /* none is new */
}

static int refuse(void *user, const struct weights_chunk *chunk)
{
    (void)chunk;
    (*(int *)user)++;
    return -ENOSPC;
}

static void whoever_stores_may_refuse(void **state)
{
    struct fixture *fixture = *state;
    int times = 0;
    learn_many(fixture);
    assert_int_equal(weights_changed_chunks(fixture->weights, refuse, &times), -ENOSPC);
    assert_int_equal(times, 1);
    assert_int_equal(changed(fixture)->count, 3); /* all of it is still to be stored */
}

static void a_forgotten_word_has_no_chunk_to_store(void **state)
{
    struct fixture *fixture = *state;
    fixture_learn_one(fixture, 3, 1, 1.0);
    fixture_forget(fixture, 3);
    assert_int_equal(changed(fixture)->count, 0);
    weights_clean(fixture->weights);
    fixture_learn_one(fixture, 3, 2, 1.0);
    assert_int_equal(changed(fixture)->count, 1);
    assert_int_equal(changed(fixture)->numbers[0][0], 2);
}

static void the_owner_may_mark_a_tag(void **state)
{
    const struct fixture *fixture = *state;
    assert_int_equal(weights_mark_tag(fixture->weights, 2), 0);
    assert_int_equal(fixture_changed_tag(fixture), 2);
}

/* --- put back -----------------------------------------------------------------------------------
 */

/* The other one's base holds the chunks that were put out; its biases are put back. */
static void what_is_put_back_scores_and_learns_as_before(void **state)
{
    struct fixture *fixture = *state;
    struct fixture other = {0};
    const struct weights_settings settings = {.surrogate = SURROGATE_SQUARED_HINGE};
    learn_many(fixture);
    assert_int_equal(fixture_renew(&other, &settings), 0);
    assert_int_equal(weights_changed_chunks(fixture->weights, fixture_keep, &other.stored), 0);
    for (uint32_t tag = 0; tag < MANY_TAGS; tag++) {
        assert_int_equal(
            weights_restore_bias(other.weights, WEIGHTS_MAIN, tag, fixture_bias(fixture, tag)), 0);
    }
    weights_restore_postings(other.weights, MANY_TAGS, weights_pruned(fixture->weights));
    other.number = fixture->number;
    fixture_learn_one(fixture, 3, 7, 1.0);
    fixture_learn_one(&other, 3, 7, 1.0);
    assert_int_equal(weights_postings(other.weights), MANY_TAGS);
    for (uint32_t tag = 0; tag < MANY_TAGS; tag++) {
        assert_near(fixture_score_of(fixture, 3, tag), fixture_score_of(&other, 3, tag), 0.0);
    }
    fixture_end(&other);
}

static void nothing_put_back_is_marked_as_changed(void **state)
{
    struct fixture *fixture = *state;
    const struct weights_feature x = fixture_word(3, 1.0F);
    fixture_put(fixture, 3, (const uint32_t[]){0, 1}, (const float[]){0.5F, 0.5F}, 2);
    fixture_put_bias(fixture, 0, 0.5F);
    assert_int_equal(weights_admit(fixture->weights, &fixture->stored.base, &x, 1), 0);
    assert_int_equal(changed(fixture)->count, 0);
    assert_int_equal(weights_changed_count(fixture->weights), 0);
    assert_int_equal(weights_changed_tag_count(fixture->weights), 0);
}

/* --- damaged ------------------------------------------------------------------------------------
 */

/* What every use of word 3 gives. */
static void assert_damaged(const struct fixture *fixture)
{
    const struct weights_feature x = fixture_word(3, 1.0F);
    const struct base *base = &fixture->stored.base;
    float part = 0.0F;
    fixture_score(fixture, NULL, 0); /* for what explaining needs of the scratch */
    assert_int_equal(weights_explain(fixture->weights, base, &x, 1, (const uint32_t[]){0}, 1,
                                     fixture->scratch, &part),
                     -EIO);
    assert_int_equal(weights_score(fixture->weights, base, &x, 1, 1, fixture->scratch), -EIO);
    assert_int_equal(weights_admit(fixture->weights, base, &x, 1), -EIO);
    assert_int_equal(weights_forget_word(fixture->weights, base, 3), -EIO);
}

static void a_chunk_over_the_size_is_refused(void **state)
{
    struct fixture *fixture = *state;
    static const uint32_t numbers[2 * (POSTINGS_CHUNK + 1)];
    fake_chunks_put(&fixture->stored, 3, 0, numbers, sizeof numbers);
    assert_damaged(fixture);
}

static void a_chunk_of_a_tag_that_is_not_known_is_refused(void **state)
{
    struct fixture *fixture = *state;
    fixture_put(fixture, 3, (const uint32_t[]){0, FIXTURE_TAGS}, (const float[]){0.5F, 0.5F}, 2);
    assert_damaged(fixture);
    assert_int_equal(weights_reserve_tags(fixture->weights, FIXTURE_TAGS + 1), 0);
    assert_near(fixture_score_of(fixture, 3, FIXTURE_TAGS), -0.5, 0.0);
}

/* Whoever copies weights must see that the word has one (weights_speak). */
static void a_weight_of_nothing_is_read_like_any_other(void **state)
{
    const struct fixture *fixture = *state;
    const uint32_t numbers[] = {0, cell_of(0, 7), 2, cell_of(-1024, 7)};
    const struct base_bytes chunk = {.data = (const unsigned char *)numbers,
                                     .size = sizeof numbers};
    struct weights_pair pairs[WEIGHTS_CHUNK_PAIRS];
    assert_int_equal(weights_read_chunk(fixture->weights, chunk, pairs), 2);
    assert_int_equal(pairs[0].tag, 0);
    assert_near(pairs[0].weight, 0.0, 0.0);
    assert_int_equal(pairs[1].tag, 2);
    assert_near(pairs[1].weight, -0.5, 0.0); /* -1024 of 2048 steps */
}

static void an_error_of_the_base_is_handed_on(void **state)
{
    struct fixture *fixture = *state;
    const struct weights_feature x = fixture_word(3, 1.0F);
    fixture_put(fixture, 3, (const uint32_t[]){0}, (const float[]){0.5F}, 1);
    fixture->stored.error = -EIO;
    assert_damaged(fixture);
    fixture->stored.error = -ENOMEM;
    assert_int_equal(
        weights_score(fixture->weights, &fixture->stored.base, &x, 1, 1, fixture->scratch),
        -ENOMEM);
    fixture->stored.error = 0;
    assert_near(fixture_score_of(fixture, 3, 0), -0.5, 0.0);
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
        weights_test(a_chunk_over_the_size_is_refused),
        weights_test(a_chunk_of_a_tag_that_is_not_known_is_refused),
        weights_test(a_weight_of_nothing_is_read_like_any_other),
        weights_test(an_error_of_the_base_is_handed_on),
    };
    return cmocka_run_group_tests_name("storing weights", tests, NULL, NULL);
}
