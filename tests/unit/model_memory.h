/*
 * model_memory: a store in memory for what model_changes puts out, and back: it keeps each part as
 * the last one put out, as a store on a disk would.
 */
#ifndef UNDERTAG_TESTS_MODEL_MEMORY_H
#define UNDERTAG_TESTS_MODEL_MEMORY_H

#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/learner/calibrators.h"
#include "daemon/learner/model_parts.h"
#include "tests/unit/near.h"

enum {
    MEMORY_WORDS = 1200,
    MEMORY_TERM = 24,
    MEMORY_CHUNKS = 3,
    MEMORY_TAGS = 400,
    MEMORY_ENTRIES = 1200,
    MEMORY_FIGURES = 2500, /* by number: the standing has the most */
    MEMORY_VALUES = STANDING_PART_VALUES
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
    struct memory_chunk shadow_chunks[MEMORY_CHUNKS];
};

struct memory_figures {
    size_t count;
    double values[MEMORY_VALUES];
};

/* Large: static or on the heap. */
struct memory {
    struct memory_word words[MEMORY_WORDS]; /* by number */
    bool has_tag[MEMORY_TAGS];
    struct model_tag tags[MEMORY_TAGS];
    struct memory_figures figures[MODEL_FIGURES_KINDS][MEMORY_FIGURES];
    struct worklist_entry entries[MEMORY_ENTRIES]; /* in no order */
    size_t entry_count;
    struct model_totals totals;
    /* Parts put out by the last memory_take. */
    size_t forgotten_out;
    size_t words_out;
    size_t chunks_out;
    size_t shadow_chunks_out;
    size_t tags_out;
    size_t figures_out;
    size_t listed_out;
    size_t delisted_out;
};

static inline struct memory *memory_new(void)
{
    struct memory *memory = calloc(1, sizeof *memory);
    assert_non_null(memory);
    return memory;
}

/* --- out of the model ---------------------------------------------------------------------------
 */

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

static inline void memory_keep_chunk(struct memory_chunk *kept, const struct weights_chunk *chunk)
{
    kept->count = chunk->count;
    memcpy(kept->tags, chunk->tags, chunk->count * sizeof *chunk->tags);
    memcpy(kept->values, chunk->values, chunk->count * sizeof *chunk->values);
    memcpy(kept->accumulators, chunk->accumulators, chunk->count * sizeof *chunk->accumulators);
}

static inline int memory_put_chunk(void *user, const struct weights_chunk *chunk)
{
    struct memory *memory = user;
    assert_true(chunk->word < MEMORY_WORDS && chunk->number < MEMORY_CHUNKS);
    memory_keep_chunk(&memory->words[chunk->word].chunks[chunk->number], chunk);
    memory->chunks_out++;
    return 0;
}

static inline int memory_put_shadow_chunk(void *user, const struct weights_chunk *chunk)
{
    struct memory *memory = user;
    assert_true(chunk->word < MEMORY_WORDS && chunk->number < MEMORY_CHUNKS);
    memory_keep_chunk(&memory->words[chunk->word].shadow_chunks[chunk->number], chunk);
    memory->shadow_chunks_out++;
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

static inline int memory_put_figures(void *user, const struct model_figures *figures)
{
    struct memory *memory = user;
    assert_true(figures->kind < MODEL_FIGURES_KINDS && figures->number < MEMORY_FIGURES &&
                figures->count > 0 && figures->count <= MEMORY_VALUES);
    struct memory_figures *kept = &memory->figures[figures->kind][figures->number];
    memset(kept, 0, sizeof *kept);
    kept->count = figures->count;
    memcpy(kept->values, figures->values, figures->count * sizeof *figures->values);
    memory->figures_out++;
    return 0;
}

static inline struct worklist_entry *memory_find_entry(struct memory *memory, uint64_t number)
{
    for (size_t i = 0; i < memory->entry_count; i++) {
        if (memory->entries[i].number == number) {
            return &memory->entries[i];
        }
    }
    return NULL;
}

static inline int memory_put_entry(void *user, const struct worklist_entry *entry)
{
    struct memory *memory = user;
    struct worklist_entry *kept = memory_find_entry(memory, entry->number);
    if (!kept) {
        assert_true(memory->entry_count < MEMORY_ENTRIES);
        kept = &memory->entries[memory->entry_count++];
    }
    *kept = *entry;
    memory->listed_out++;
    return 0;
}

static inline int memory_remove_entry(void *user, uint64_t number)
{
    struct memory *memory = user;
    struct worklist_entry *kept = memory_find_entry(memory, number);
    if (kept) {
        *kept = memory->entries[--memory->entry_count];
    }
    memory->delisted_out++;
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
                               .shadow_chunk = memory_put_shadow_chunk,
                               .tag = memory_put_tag,
                               .figures = memory_put_figures,
                               .delisted = memory_remove_entry,
                               .listed = memory_put_entry,
                               .totals = memory_put_totals};
}

/* Takes what has changed since the model was last told that all is stored. */
static inline void memory_take(struct memory *memory, const struct model *model)
{
    const struct model_sink sink = memory_sink(memory);
    memory->forgotten_out = 0;
    memory->words_out = 0;
    memory->chunks_out = 0;
    memory->shadow_chunks_out = 0;
    memory->tags_out = 0;
    memory->figures_out = 0;
    memory->listed_out = 0;
    memory->delisted_out = 0;
    assert_int_equal(model_changes(model, &sink), 0);
}

/* All that memory_take took but the totals. */
static inline size_t memory_parts_out(const struct memory *memory)
{
    return memory->forgotten_out + memory->words_out + memory->chunks_out +
           memory->shadow_chunks_out + memory->tags_out + memory->figures_out + memory->listed_out +
           memory->delisted_out;
}

/* Takes what has changed, and tells the model that it is stored. */
static inline void memory_store(struct memory *memory, struct model *model)
{
    memory_take(memory, model);
    model_clean(model);
}

/* --- back into a model --------------------------------------------------------------------------
 */

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

static inline struct weights_chunk memory_chunk_of(const struct memory_chunk *kept, uint32_t word,
                                                   uint32_t number)
{
    return (struct weights_chunk){.word = word,
                                  .number = number,
                                  .count = kept->count,
                                  .tags = kept->tags,
                                  .values = kept->values,
                                  .accumulators = kept->accumulators};
}

static inline void memory_restore_chunks(const struct memory *memory, uint32_t word,
                                         struct model *model)
{
    const struct memory_word *kept = &memory->words[word];
    for (uint32_t number = 0; number < MEMORY_CHUNKS; number++) {
        struct weights_chunk chunk = memory_chunk_of(&kept->chunks[number], word, number);
        struct weights_chunk shadow = memory_chunk_of(&kept->shadow_chunks[number], word, number);
        assert_int_equal(chunk.count > 0 ? model_restore_chunk(model, &chunk) : 0, 0);
        assert_int_equal(shadow.count > 0 ? model_restore_shadow_chunk(model, &shadow) : 0, 0);
    }
}

static inline void memory_restore_figures(const struct memory *memory, struct model *model)
{
    for (int kind = 0; kind < MODEL_FIGURES_KINDS; kind++) {
        for (uint32_t number = 0; number < MEMORY_FIGURES; number++) {
            const struct memory_figures *kept = &memory->figures[kind][number];
            if (kept->count > 0) {
                struct model_figures figures = {.kind = (enum model_figures_kind)kind,
                                                .number = number,
                                                .count = kept->count,
                                                .values = kept->values};
                assert_int_equal(model_restore_figures(model, &figures), 0);
            }
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
    memory_restore_figures(memory, model);
    for (size_t i = 0; i < memory->entry_count; i++) {
        assert_int_equal(model_restore_entry(model, &memory->entries[i]), 0);
    }
    assert_int_equal(model_restore_totals(model, &memory->totals), 0);
    assert_int_equal(model_restored(model), 0);
}

/* --- reading ------------------------------------------------------------------------------------
 */

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

/* The evidence of one bin and class, in pairs as of now. */
static inline struct calibrators_cell memory_cell(const struct memory *memory, size_t bin,
                                                  size_t tag_class)
{
    struct calibrators_cell cell = {0};
    const struct memory_figures *kept = &memory->figures[MODEL_FIGURES_BIN][bin];
    if (kept->count > 0) {
        assert_int_equal(kept->count * sizeof *kept->values, sizeof(struct calibrators_bin));
        memcpy(&cell, (const char *)kept->values + tag_class * sizeof cell, sizeof cell);
    }
    double one = memory->totals.evidence_gain;
    return (struct calibrators_cell){.pairs = cell.pairs / one,
                                     .given = cell.given / one,
                                     .known = cell.known / one,
                                     .known_true = cell.known_true / one,
                                     .ruled = cell.ruled / one,
                                     .ruled_true = cell.ruled_true / one};
}

/* The evidence of a bin over all classes, or of all bins (CALIBRATORS_BINS). */
static inline struct calibrators_cell memory_evidence(const struct memory *memory, size_t bin)
{
    struct calibrators_cell sum = {0};
    size_t first = bin < CALIBRATORS_BINS ? bin : 0;
    size_t end = bin < CALIBRATORS_BINS ? bin + 1 : CALIBRATORS_BINS;
    for (size_t b = first; b < end; b++) {
        for (size_t c = 0; c < CALIBRATORS_CLASSES; c++) {
            struct calibrators_cell cell = memory_cell(memory, b, c);
            sum.pairs += cell.pairs;
            sum.given += cell.given;
            sum.known += cell.known;
            sum.known_true += cell.known_true;
            sum.ruled += cell.ruled;
            sum.ruled_true += cell.ruled_true;
        }
    }
    return sum;
}

/* --- comparing ----------------------------------------------------------------------------------
 */

static inline void memory_assert_same_entry(const struct worklist_entry *one,
                                            const struct worklist_entry *other)
{
    assert_non_null(other);
    assert_true(one->number == other->number);
    assert_true(one->scored == other->scored);
    assert_true(one->counted == other->counted);
    assert_true(one->promise == other->promise);
    assert_int_equal(one->gap_count, other->gap_count);
    assert_memory_equal(one->gaps, other->gaps, one->gap_count * sizeof *one->gaps);
    assert_int_equal(one->pair_count, other->pair_count);
    assert_memory_equal(one->pairs, other->pairs, one->pair_count * sizeof *one->pairs);
}

static inline void memory_assert_same_words(const struct memory *one, const struct memory *other)
{
    assert_int_equal(memory_word_count(one), memory_word_count(other));
    for (size_t i = 0; i < MEMORY_WORDS; i++) {
        const struct memory_word *word = &one->words[i];
        if (word->is_set) {
            const struct memory_word *same = memory_find(other, word->term);
            assert_non_null(same);
            assert_int_equal(word->count, same->count);
            assert_memory_equal(word->chunks, same->chunks, sizeof word->chunks);
            assert_memory_equal(word->shadow_chunks, same->shadow_chunks,
                                sizeof word->shadow_chunks);
        }
    }
}

static inline void memory_assert_same_figures(const struct memory *one, const struct memory *other)
{
    for (size_t kind = 0; kind < MODEL_FIGURES_KINDS; kind++) {
        for (size_t number = 0; number < MEMORY_FIGURES; number++) {
            assert_memory_equal(&one->figures[kind][number], &other->figures[kind][number],
                                sizeof one->figures[kind][number]);
        }
    }
}

/* Two stores hold the same to the last bit; the numbers of the words may differ, and the order of
 * the entries. */
static inline void memory_assert_same(const struct memory *one, struct memory *other)
{
    memory_assert_same_words(one, other);
    assert_memory_equal(one->has_tag, other->has_tag, sizeof one->has_tag);
    assert_memory_equal(one->tags, other->tags, sizeof one->tags);
    memory_assert_same_figures(one, other);
    assert_memory_equal(&one->totals, &other->totals, sizeof one->totals);
    assert_int_equal(one->entry_count, other->entry_count);
    for (size_t i = 0; i < one->entry_count; i++) {
        memory_assert_same_entry(&one->entries[i],
                                 memory_find_entry(other, one->entries[i].number));
    }
}

#endif
