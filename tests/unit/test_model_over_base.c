/*
 * The model above what was stored: words that go and come again, what is let go of, and a base that
 * cannot be read or is damaged.
 */
#include "daemon/learner/model.h"

#include <errno.h>
#include <stdlib.h>

#include "tests/unit/model_fixture.h"
#include "tests/unit/model_memory.h"

enum {
    STORED_ITEMS = 60
};

/* A learner of a stream that is stored, and has let go of all that it may. */
struct stored {
    struct learner learner;
    struct memory *memory;
    struct entry filed; /* the last of it: has tag 20, may lack 3 and 9 */
};

static void learn_stream(const struct learner *learner, int count)
{
    struct stream stream = {.random = {4}, .tag_count = STREAM_TAGS, .given_share = 0.8};
    uint32_t truth[ENTRY_TAGS];
    struct entry entry;
    for (int i = 0; i < count; i++) {
        (void)stream_next(&stream, &entry, truth);
        learner_change(learner, &entry, NULL);
    }
}

/* With nothing learned and nothing stored. */
static struct learner *begin_anew(struct stored *stored)
{
    const struct model_settings settings = learner_settings();
    memory_clear(stored->memory);
    learner_renew(&stored->learner, &settings);
    learner_read(&stored->learner, &stored->memory->base);
    return &stored->learner;
}

static void begin_again(struct stored *stored)
{
    const struct model_settings settings = learner_settings();
    learner_renew(&stored->learner, &settings);
    memory_restore(stored->memory, stored->learner.model);
    learner_read(&stored->learner, &stored->memory->base);
}

static int set_up(void **state)
{
    static struct stored stored;
    stored.memory = memory_new();
    learn_stream(begin_anew(&stored), STORED_ITEMS);
    entry_set(&stored.filed, DRAFT, TAGS(20));
    learner_change(&stored.learner, &stored.filed, NULL);
    memory_store(stored.memory, stored.learner.model);
    learner_trim(&stored.learner, 0, 0);
    *state = &stored;
    return 0;
}

static int tear_down(void **state)
{
    struct stored *stored = *state;
    learner_free(&stored->learner);
    free(stored->memory);
    return 0;
}

/* --- words that go and come again ---------------------------------------------------------------
 */

/* When the fog's word is stored while its first item comes and goes, and its second one comes. */
struct moments {
    bool after_it_came;
    bool after_it_went;
};

static void store_and_trim(const struct stored *stored, bool now)
{
    if (now) {
        memory_store(stored->memory, stored->learner.model);
        learner_trim(&stored->learner, 0, 0);
    }
}

static void assert_same_of_words(const struct learner *one, const struct learner *other,
                                 const char *words)
{
    struct entry entry;
    entry_set(&entry, words, NO_TAGS);
    struct model_question question = entry_question(&entry);
    question.why = true;
    struct model_answer first = learner_answer(one, &question);
    struct model_answer second = learner_answer(other, &question);
    assert_same_answer(&first, &second);
}

/* Beside a learner that never stores anything, with the same entries. The fog's weight for tag 1 is
 * gone with it: it says no more of the tag than a word that nobody knows. */
static void lose_and_find_fog(struct stored *stored, struct moments moments)
{
    struct learner whole = {0};
    struct learner *const learners[] = {&stored->learner, &whole};
    const struct model_settings settings = learner_settings();
    struct entry entries[4];
    (void)begin_anew(stored);
    learner_renew(&whole, &settings);
    entry_set(&entries[0], "bell", TAGS(0, 1));
    entry_set(&entries[1], "fog", TAGS(1));
    entry_set(&entries[2], "fog bell", NO_TAGS);
    entry_set(&entries[3], "fog", TAGS(2));
    for (size_t i = 0; i < 2; i++) {
        learner_change(learners[i], &entries[0], NULL);
        learner_change(learners[i], &entries[1], NULL);
        store_and_trim(stored, moments.after_it_came && i == 0);
        learner_change(learners[i], NULL, &entries[1]);
        store_and_trim(stored, moments.after_it_went && i == 0);
        learner_change(learners[i], &entries[2], NULL);
    }
    assert_same_of_words(&whole, &stored->learner, "fog");
    assert_near(learner_score(&whole, "fog", 1), learner_score(&whole, "moon", 1), 0.0);
    learner_change(&whole, &entries[3], NULL);
    learner_change(&stored->learner, &entries[3], NULL);
    assert_same_of_words(&whole, &stored->learner, "fog bell");
    store_and_trim(stored, true);
    assert_same_of_words(&whole, &stored->learner, "fog bell");
    assert_int_equal(learner_size(&whole).words, 2);
    assert_int_equal(learner_size(&stored->learner).words, 2);
    assert_int_equal(learner_size(&stored->learner).postings, learner_size(&whole).postings);
    learner_free(&whole);
}

/* Bell is word 0, the fog that went 1, and the fog that came again 2: it is there once. */
static void assert_fog_is_new(const struct stored *stored)
{
    const struct memory *memory = stored->memory;
    assert_int_equal(memory_word_count(memory), 2);
    assert_string_equal(memory->words[2].term, "fog");
    assert_int_equal(memory->words[2].count, 2);
    assert_int_equal(memory->words[1].chunks[0].size, 0);
    assert_int_equal(memory->words[2].chunks[0].size, 2 * sizeof(uint32_t)); /* tag 2's weight */
    assert_int_equal(memory->totals.words.next_number, 3);
}

static void a_word_that_was_never_stored_goes_and_comes_again_as_new(void **state)
{
    lose_and_find_fog(*state, (struct moments){.after_it_came = false});
    assert_fog_is_new(*state);
}

static void a_stored_word_goes_and_comes_again_as_new_before_it_is_stored(void **state)
{
    lose_and_find_fog(*state, (struct moments){.after_it_came = true});
    assert_fog_is_new(*state);
}

static void a_stored_word_goes_and_comes_again_as_new_after_that_was_stored(void **state)
{
    lose_and_find_fog(*state, (struct moments){.after_it_came = true, .after_it_went = true});
    assert_fog_is_new(*state);
}

/* --- memory -------------------------------------------------------------------------------------
 */

/* Whatever was learned: at least twice a chunk's own numbers, four bytes each, of which it has two.
 */
static void what_is_to_be_stored_grows_with_what_is_learned_and_is_gone_when_it_is(void **state)
{
    struct stored *stored = *state;
    uint64_t changed[3];
    uint64_t nothing = model_changed_bytes(begin_anew(stored)->model);
    for (size_t i = 0; i < 3; i++) {
        learn_stream(&stored->learner, 50);
        learner_file(&stored->learner, i == 0 ? "fog" : i == 1 ? "bell" : "horn", TAGS(1));
        changed[i] = model_changed_bytes(stored->learner.model);
        assert_true(changed[i] > (i == 0 ? nothing : changed[i - 1]));
    }
    memory_store(stored->memory, stored->learner.model);
    assert_true(changed[2] - nothing > 16 * stored->memory->out.chunks);
    assert_true(stored->memory->out.chunks > 100);
    assert_int_equal(model_changed_bytes(stored->learner.model), nothing);
}

/* Five words of no tag, so without weights: 12 bytes each, and the term. */
static void words_that_are_not_stored_are_among_what_is_to_be_stored(void **state)
{
    static const char *const WORDS[] = {"fog", "bell horn lamp oil wick"};
    uint64_t changed[2];
    for (size_t i = 0; i < 2; i++) {
        const struct learner *learner = begin_anew(*state);
        learner_file(learner, "fog", NO_TAGS);
        learner_file(learner, WORDS[i], NO_TAGS);
        changed[i] = model_changed_bytes(learner->model);
    }
    assert_true(changed[1] >= changed[0] + strlen(WORDS[1]) + 60);
}

static void a_model_read_from_its_base_has_nothing_to_store(void **state)
{
    struct stored *stored = *state;
    uint64_t changed = model_changed_bytes(stored->learner.model);
    (void)learner_ask(&stored->learner, DRAFT);
    assert_int_equal(model_changed_bytes(stored->learner.model), changed);
    memory_take(stored->memory, stored->learner.model);
    assert_int_equal(memory_parts_out(stored->memory), 0);
}

static void what_is_stored_is_let_go_of_and_nothing_else(void **state)
{
    struct stored *stored = *state;
    struct learner *learner = begin_anew(stored);
    learn_stream(learner, 300);
    struct model_size full = learner_size(learner);
    learner_trim(learner, 0, 0); /* nothing is stored yet */
    struct model_size kept = learner_size(learner);
    assert_int_equal(kept.dictionary_bytes, full.dictionary_bytes);
    assert_int_equal(kept.weights_bytes, full.weights_bytes);
    memory_store(stored->memory, learner->model);
    learner_trim(learner, UINT64_MAX, UINT64_MAX); /* there is room for all */
    kept = learner_size(learner);
    assert_int_equal(kept.dictionary_bytes, full.dictionary_bytes);
    assert_true(kept.weights_bytes >= full.weights_bytes);
    learner_trim(learner, 0, 0);
    struct model_size least = learner_size(learner);
    assert_true(least.dictionary_bytes < 3 * full.dictionary_bytes / 4);
    assert_true(least.weights_bytes < 3 * full.weights_bytes / 4);
    assert_int_equal(least.documents, full.documents);
    assert_int_equal(least.words, full.words);
    assert_int_equal(least.postings, full.postings);
    assert_int_equal(least.listed, full.listed);
}

/* Down to a bound between all and nothing, and not much further than to it. */
static void as_much_is_kept_as_there_is_room_for(void **state)
{
    struct stored *stored = *state;
    struct model_size least = learner_size(&stored->learner);
    for (int i = 0; i < 40; i++) {
        learner_file(&stored->learner, i % 2 ? "log t3q0 n1q0" : "log t9q1 t20q3", TAGS(3, 9));
    }
    learn_stream(&stored->learner, 200);
    memory_store(stored->memory, stored->learner.model);
    struct model_size full = learner_size(&stored->learner);
    uint64_t words = (full.dictionary_bytes + least.dictionary_bytes) / 2;
    uint64_t weights = (full.weights_bytes + least.weights_bytes) / 2;
    learner_trim(&stored->learner, words, weights);
    struct model_size kept = learner_size(&stored->learner);
    assert_true(kept.dictionary_bytes <= words && kept.dictionary_bytes + 200 > words);
    assert_true(kept.weights_bytes <= weights && kept.weights_bytes + 2000 > weights);
}

/* --- a base that cannot be read -----------------------------------------------------------------
 */

static const unsigned WORDS_CHUNKS_ENTRIES[] = {MEMORY_NO_WORD, MEMORY_NO_CHUNK, MEMORY_NO_ENTRY};

static int ask_of_filed(const struct stored *stored)
{
    struct model_question question = filed_question(&stored->filed);
    struct model_answer answer;
    return model_ask(stored->learner.model, &question, stored->learner.scratch, &answer);
}

/* Once it can be read again the answer is what it was. */
static void asking_says_that_the_base_cannot_be_read(void **state)
{
    struct stored *stored = *state;
    struct model_question question = filed_question(&stored->filed);
    double expected = learner_answer(&stored->learner, &question).expected;
    for (size_t i = 0; i < 3; i++) {
        stored->memory->refused = WORDS_CHUNKS_ENTRIES[i];
        assert_int_equal(ask_of_filed(stored), -EIO);
        stored->memory->refused = 0;
        assert_true(learner_answer(&stored->learner, &question).expected == expected);
    }
}

static int rescore_filed(const struct stored *stored)
{
    const struct model_item item = entry_item(&stored->filed);
    struct worklist_entry entry;
    return model_rescore(stored->learner.model, &item, stored->learner.scratch, &entry);
}

static void scoring_again_says_that_the_base_cannot_be_read(void **state)
{
    struct stored *stored = *state;
    for (size_t i = 0; i < 3; i++) {
        stored->memory->refused = WORDS_CHUNKS_ENTRIES[i];
        assert_int_equal(rescore_filed(stored), -EIO);
    }
    stored->memory->refused = 0;
    assert_int_equal(rescore_filed(stored), 0);
}

static int change(const struct stored *stored, const struct entry *item,
                  const struct entry *replaced)
{
    struct model_item new_item = item ? entry_item(item) : (struct model_item){0};
    struct model_item old_item = replaced ? entry_item(replaced) : (struct model_item){0};
    return model_learn(stored->learner.model, item ? &new_item : NULL, replaced ? &old_item : NULL,
                       stored->learner.scratch);
}

/* A model that could not read on is of no use any more; the next one begins with what is stored. */
static void assert_change(struct stored *stored, unsigned refused, const struct entry *item,
                          const struct entry *replaced, int result)
{
    stored->memory->refused = refused;
    assert_int_equal(change(stored, item, replaced), result);
    stored->memory->refused = 0;
    begin_again(stored);
}

/* What a filing does not read it does not miss: its entry is new, but for its number. */
static void learning_says_that_the_base_cannot_be_read(void **state)
{
    struct stored *stored = *state;
    struct entry revised;
    struct entry ruled;
    entry_set(&revised, "log t3q0", TAGS(3));
    entry_follow(&ruled, &stored->filed);
    entry_find_tag(&ruled, 3);
    for (size_t i = 0; i < 3; i++) {
        assert_change(stored, WORDS_CHUNKS_ENTRIES[i], &revised, NULL, -EIO);
        assert_change(stored, WORDS_CHUNKS_ENTRIES[i], &revised, &stored->filed, -EIO);
        assert_change(stored, WORDS_CHUNKS_ENTRIES[i], &ruled, &stored->filed, -EIO);
    }
    assert_change(stored, MEMORY_NO_WORD, NULL, &stored->filed, -EIO);
    assert_change(stored, MEMORY_NO_ENTRY, NULL, &stored->filed, -EIO);
    assert_change(stored, 0, &revised, &stored->filed, 0);
    assert_change(stored, 0, &ruled, &stored->filed, 0);
    assert_change(stored, 0, NULL, &stored->filed, 0);
}

static int rank_all(const struct stored *stored)
{
    struct model_ranked *ranked = NULL;
    size_t count = 7;
    int result = model_rank_worklist(stored->learner.model, stored->learner.base, MODEL_ANY_TAG,
                                     0.0, &ranked, &count);
    assert_true(result == 0 || (!ranked && count == 7)); /* untouched */
    free(ranked);
    return result;
}

static void the_worklist_says_that_the_base_cannot_be_read(void **state)
{
    struct stored *stored = *state;
    struct model *model = stored->learner.model;
    const struct worklist_entry entry = learner_listed(&stored->learner, &stored->filed);
    struct entry late;
    uint64_t number = 0;
    entry_set(&late, "fog", NO_TAGS);
    late.number *= 2; /* so that all others are stale */
    learner_change(&stored->learner, &late, NULL);
    memory_store(stored->memory, model);
    assert_int_equal(learner_size(&stored->learner).stale, STORED_ITEMS + 1);
    stored->memory->refused = MEMORY_NOTHING;
    assert_int_equal(rank_all(stored), -EIO);
    assert_int_equal(model_next_stale(model, stored->learner.base, &number), -EIO);
    assert_int_equal(number, 0);
    assert_int_equal(model_relist(model, stored->learner.base, &entry), -EIO);
    assert_int_equal(model_delist(model, stored->learner.base, entry.number), -EIO);
    stored->memory->refused = 0;
    assert_int_equal(rank_all(stored), 0);
    assert_int_equal(model_next_stale(model, stored->learner.base, &number), 0);
    assert_int_equal(learner_size(&stored->learner).listed, STORED_ITEMS + 2);
}

/* --- a damaged base -----------------------------------------------------------------------------
 */

/* An entry names a tag, or gives a number of its gaps, that cannot be. */
static void assert_entry_is_damaged(struct stored *stored)
{
    struct entry revised;
    struct entry ruled;
    entry_set(&revised, "log t3q0", TAGS(3));
    entry_follow(&ruled, &stored->filed);
    entry_deny_tag(&ruled, 3);
    assert_int_equal(ask_of_filed(stored), -EIO);
    assert_int_equal(rescore_filed(stored), -EIO);
    assert_int_equal(rank_all(stored), -EIO);
    assert_change(stored, 0, &revised, &stored->filed, -EIO);
    assert_change(stored, 0, &ruled, &stored->filed, -EIO);
}

static void an_entry_of_tags_that_nobody_knows_is_damaged(void **state)
{
    struct stored *stored = *state;
    struct worklist_entry *entry = memory_find_entry(stored->memory, stored->filed.number);
    const struct worklist_entry sound = *entry;
    const uint32_t unknown[] = {(uint32_t)learner_size(&stored->learner).tags, UINT32_MAX};
    for (size_t i = 0; i < 2; i++) {
        entry->gaps[entry->gap_count - 1].tag = unknown[i];
        assert_entry_is_damaged(stored);
        *entry = sound;
        entry->pairs[entry->pair_count - 1].tag = unknown[i];
        assert_entry_is_damaged(stored);
        *entry = sound;
    }
    assert_int_equal(ask_of_filed(stored), 0);
}

static void an_entry_of_more_gaps_than_there_is_room_for_is_damaged(void **state)
{
    struct stored *stored = *state;
    struct worklist_entry *entry = memory_find_entry(stored->memory, stored->filed.number);
    const struct worklist_entry sound = *entry;
    entry->gap_count = WORKLIST_GAPS + 1;
    assert_entry_is_damaged(stored);
    *entry = sound;
    entry->pair_count = UINT32_MAX;
    assert_entry_is_damaged(stored);
}

static struct memory_word *stored_word(const struct stored *stored, const char *term)
{
    struct base_word word = {0};
    assert_int_equal(memory_read_word(stored->memory, term, strlen(term), &word), 0);
    return &stored->memory->words[word.number];
}

static void assert_weights_are_damaged(struct stored *stored)
{
    struct entry again;
    entry_set(&again, DRAFT, TAGS(20));
    assert_int_equal(ask_of_filed(stored), -EIO);
    assert_change(stored, 0, &again, NULL, -EIO);
}

static void weights_of_a_tag_that_nobody_knows_are_damaged(void **state)
{
    struct stored *stored = *state;
    struct memory_chunk *chunk = &stored_word(stored, "t3q0")->chunks[0];
    const uint32_t unknown[] = {(uint32_t)learner_size(&stored->learner).tags, UINT32_MAX};
    for (size_t i = 0; i < 2; i++) {
        memcpy(chunk->bytes, &unknown[i], sizeof unknown[i]);
        assert_weights_are_damaged(stored);
    }
}

/* Half a posting; one with the cell of a shadow that there is not; more than a chunk has. */
static void weights_of_another_size_are_damaged(void **state)
{
    const size_t sizes[] = {sizeof(uint32_t), 3 * sizeof(uint32_t), MEMORY_CHUNK_BYTES};
    struct stored *stored = *state;
    struct memory_chunk *chunk = &stored_word(stored, "t3q0")->chunks[0];
    for (size_t i = 0; i < 3; i++) {
        chunk->size = sizes[i];
        assert_weights_are_damaged(stored);
    }
}

/* Its number was never given out. */
static void a_word_from_nowhere_is_damaged(void **state)
{
    struct stored *stored = *state;
    struct memory_word *nowhere = &stored->memory->words[MEMORY_WORDS - 1];
    struct entry spoken;
    *nowhere = (struct memory_word){.is_set = true, .term = "sextant", .count = 1};
    entry_set(&spoken, "log sextant", NO_TAGS);
    struct model_question question = entry_question(&spoken);
    struct model_answer answer;
    assert_int_equal(model_ask(stored->learner.model, &question, stored->learner.scratch, &answer),
                     -EIO);
    assert_change(stored, 0, &spoken, NULL, -EIO);
}

int main(void)
{
#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)
    const struct CMUnitTest tests[] = {
        TEST(a_word_that_was_never_stored_goes_and_comes_again_as_new),
        TEST(a_stored_word_goes_and_comes_again_as_new_before_it_is_stored),
        TEST(a_stored_word_goes_and_comes_again_as_new_after_that_was_stored),
        TEST(what_is_to_be_stored_grows_with_what_is_learned_and_is_gone_when_it_is),
        TEST(words_that_are_not_stored_are_among_what_is_to_be_stored),
        TEST(a_model_read_from_its_base_has_nothing_to_store),
        TEST(what_is_stored_is_let_go_of_and_nothing_else),
        TEST(as_much_is_kept_as_there_is_room_for),
        TEST(asking_says_that_the_base_cannot_be_read),
        TEST(scoring_again_says_that_the_base_cannot_be_read),
        TEST(learning_says_that_the_base_cannot_be_read),
        TEST(the_worklist_says_that_the_base_cannot_be_read),
        TEST(an_entry_of_tags_that_nobody_knows_is_damaged),
        TEST(an_entry_of_more_gaps_than_there_is_room_for_is_damaged),
        TEST(weights_of_a_tag_that_nobody_knows_are_damaged),
        TEST(weights_of_another_size_are_damaged),
        TEST(a_word_from_nowhere_is_damaged),
    };
    return cmocka_run_group_tests_name("above what is stored", tests, NULL, NULL);
}
