/*
 * model_memory: a store in memory for what model_changes puts out, and back: it keeps each part as
 * the last one put out, as a store on a disk would.
 */
#ifndef UNDERTAG_TESTS_MODEL_MEMORY_H
#define UNDERTAG_TESTS_MODEL_MEMORY_H

#include <errno.h>
#include <string.h>

#include "daemon/learner/model_parts.h"
#include "tests/unit/near.h"

enum {
    MEMORY_WORDS = 1200,
    MEMORY_TERM = 24,
    MEMORY_CHUNKS = 3,
    MEMORY_TAGS = 400
};

struct memory_chunk {
    uint32_t count;
    uint32_t tags[WEIGHTS_CHUNK_POSTINGS];
    float values[WEIGHTS_CHUNK_POSTINGS];
    float accumulators[WEIGHTS_CHUNK_POSTINGS];
};

struct memory_word {
    bool is_set;
    char term[MEMORY_TERM];
    uint32_t count;
    struct memory_chunk chunks[MEMORY_CHUNKS];
};

/* Large: static or on the heap. */
struct memory {
    struct memory_word words[MEMORY_WORDS]; /* by number */
    bool has_tag[MEMORY_TAGS];
    struct model_tag tags[MEMORY_TAGS];
    struct calibration_bin bins[CALIBRATION_BINS];
    struct model_totals totals;
    /* Parts put out by the last memory_take. */
    size_t forgotten_out;
    size_t words_out;
    size_t chunks_out;
    size_t tags_out;
    size_t bins_out;
};

static inline int memory_forget(void *user, const struct model_word *word)
{
    struct memory *memory = user;
    assert_true(word->number < MEMORY_WORDS);
    assert_int_equal(word->count, 0);
    memset(&memory->words[word->number], 0, sizeof memory->words[word->number]);
    memory->forgotten_out++;
    return 0;
}

static inline int memory_put_word(void *user, const struct model_word *word)
{
    struct memory *memory = user;
    assert_true(word->number < MEMORY_WORDS && word->term_bytes < MEMORY_TERM);
    struct memory_word *kept = &memory->words[word->number];
    kept->is_set = true;
    kept->count = word->count;
    memset(kept->term, 0, sizeof kept->term);
    memcpy(kept->term, word->term, word->term_bytes);
    memory->words_out++;
    return 0;
}

static inline int memory_put_chunk(void *user, const struct weights_chunk *chunk)
{
    struct memory *memory = user;
    assert_true(chunk->word < MEMORY_WORDS && chunk->number < MEMORY_CHUNKS);
    struct memory_chunk *kept = &memory->words[chunk->word].chunks[chunk->number];
    kept->count = chunk->count;
    memcpy(kept->tags, chunk->tags, chunk->count * sizeof *chunk->tags);
    memcpy(kept->values, chunk->values, chunk->count * sizeof *chunk->values);
    memcpy(kept->accumulators, chunk->accumulators, chunk->count * sizeof *chunk->accumulators);
    memory->chunks_out++;
    return 0;
}

static inline int memory_put_tag(void *user, const struct model_tag *tag)
{
    struct memory *memory = user;
    assert_true(tag->number < MEMORY_TAGS);
    memory->has_tag[tag->number] = true;
    memory->tags[tag->number] = *tag;
    memory->tags_out++;
    return 0;
}

static inline int memory_put_bin(void *user, uint32_t number, const struct calibration_bin *bin)
{
    struct memory *memory = user;
    assert_true(number < CALIBRATION_BINS);
    memory->bins[number] = *bin;
    memory->bins_out++;
    return 0;
}

static inline int memory_put_totals(void *user, const struct model_totals *totals)
{
    ((struct memory *)user)->totals = *totals;
    return 0;
}

static inline struct model_sink memory_sink(struct memory *memory)
{
    return (struct model_sink){.user = memory,
                               .forgotten = memory_forget,
                               .word = memory_put_word,
                               .chunk = memory_put_chunk,
                               .tag = memory_put_tag,
                               .bin = memory_put_bin,
                               .totals = memory_put_totals};
}

/* Takes what has changed since the model was last told that all is stored. */
static inline void memory_take(struct memory *memory, const struct model *model)
{
    const struct model_sink sink = memory_sink(memory);
    memory->forgotten_out = 0;
    memory->words_out = 0;
    memory->chunks_out = 0;
    memory->tags_out = 0;
    memory->bins_out = 0;
    assert_int_equal(model_changes(model, &sink), 0);
}

/* Takes what has changed, and tells the model that it is stored. */
static inline void memory_store(struct memory *memory, struct model *model)
{
    memory_take(memory, model);
    model_clean(model);
}

static inline void memory_restore_word(const struct memory *memory, uint32_t number,
                                       struct model *model)
{
    const struct memory_word *kept = &memory->words[number];
    if (kept->is_set) {
        struct model_word word = {.term = kept->term,
                                  .term_bytes = strlen(kept->term),
                                  .number = number,
                                  .count = kept->count};
        assert_int_equal(model_restore_word(model, &word), 0);
    }
}

static inline void memory_restore_chunks(const struct memory *memory, uint32_t word,
                                         struct model *model)
{
    for (uint32_t number = 0; number < MEMORY_CHUNKS; number++) {
        const struct memory_chunk *kept = &memory->words[word].chunks[number];
        if (kept->count > 0) {
            struct weights_chunk chunk = {.word = word,
                                          .number = number,
                                          .count = kept->count,
                                          .tags = kept->tags,
                                          .values = kept->values,
                                          .accumulators = kept->accumulators};
            assert_int_equal(model_restore_chunk(model, &chunk), 0);
        }
    }
}

/* Into a new model. */
static inline void memory_restore(const struct memory *memory, struct model *model)
{
    for (uint32_t number = 0; number < MEMORY_WORDS; number++) {
        memory_restore_word(memory, number, model);
    }
    for (uint32_t number = 0; number < MEMORY_WORDS; number++) {
        memory_restore_chunks(memory, number, model);
    }
    for (uint32_t tag = 0; tag < MEMORY_TAGS; tag++) {
        if (memory->has_tag[tag]) {
            assert_int_equal(model_restore_tag(model, &memory->tags[tag]), 0);
        }
    }
    for (uint32_t bin = 0; bin < CALIBRATION_BINS; bin++) {
        assert_int_equal(model_restore_bin(model, bin, &memory->bins[bin]), 0);
    }
    assert_int_equal(model_restore_totals(model, &memory->totals), 0);
    assert_int_equal(model_restored(model), 0);
}

static inline const struct memory_word *memory_find(const struct memory *memory, const char *term)
{
    for (size_t i = 0; i < MEMORY_WORDS; i++) {
        if (memory->words[i].is_set && strcmp(memory->words[i].term, term) == 0) {
            return &memory->words[i];
        }
    }
    return NULL;
}

static inline size_t memory_word_count(const struct memory *memory)
{
    size_t count = 0;
    for (size_t i = 0; i < MEMORY_WORDS; i++) {
        count += memory->words[i].is_set;
    }
    return count;
}

/* Two stores hold the same to the last bit; the numbers of the words may differ. */
static inline void memory_assert_same(const struct memory *one, const struct memory *other)
{
    assert_int_equal(memory_word_count(one), memory_word_count(other));
    for (size_t i = 0; i < MEMORY_WORDS; i++) {
        const struct memory_word *word = &one->words[i];
        if (word->is_set) {
            const struct memory_word *same = memory_find(other, word->term);
            assert_non_null(same);
            assert_int_equal(word->count, same->count);
            assert_memory_equal(word->chunks, same->chunks, sizeof word->chunks);
        }
    }
    assert_memory_equal(one->has_tag, other->has_tag, sizeof one->has_tag);
    assert_memory_equal(one->tags, other->tags, sizeof one->tags);
    assert_memory_equal(one->bins, other->bins, sizeof one->bins);
    assert_memory_equal(&one->totals, &other->totals, sizeof one->totals);
}

#endif
