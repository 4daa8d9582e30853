/*
 * model_memory: a store in memory for what model_changes puts out: it keeps each part as the last
 * one put out, as a store on a disk would, gives back what a model holds in memory, and is the base
 * from which it reads the rest.
 */
#ifndef UNDERTAG_TESTS_MODEL_MEMORY_H
#define UNDERTAG_TESTS_MODEL_MEMORY_H

#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/base.h"
#include "daemon/learner/calibrators.h"
#include "daemon/learner/cell.h"
#include "daemon/learner/model_parts.h"
#include "daemon/learner/postings.h"
#include "tests/unit/near.h"

enum {
    MEMORY_WORDS = 2400, /* by number, which is never given out twice */
    MEMORY_TERM = 24,
    MEMORY_CHUNKS = 3,
    MEMORY_TAGS = 400,
    MEMORY_ENTRIES = 1200,
    MEMORY_FIGURES = 2500,                /* by number: the standing has the most */
    MEMORY_VALUES = STANDING_PART_VALUES, /* the worklist has fewer */
    MEMORY_CHUNK_BYTES = POSTINGS_MOST_NUMBERS * (int)sizeof(uint32_t)
};

/* The bytes lie at an odd address, as those of a store may. */
struct memory_chunk {
    size_t size; /* 0: there is none */
    unsigned char before;
    unsigned char bytes[MEMORY_CHUNK_BYTES];
};

struct memory_word {
    bool is_set;
    char term[MEMORY_TERM];
    uint32_t count;
    struct memory_chunk chunks[MEMORY_CHUNKS];
};

struct memory_figures {
    size_t count;
    double values[MEMORY_VALUES];
};

/* What the base cannot read. */
enum memory_refusal {
    MEMORY_NO_WORD = 1,
    MEMORY_NO_CHUNK = 2,
    MEMORY_NO_ENTRY = 4,
    MEMORY_NO_ENTRY_AFTER = 8,
    MEMORY_NOTHING = 15
};

/* How many parts were put out. */
struct memory_parts {
    size_t forgotten, words, cut, chunks, tags, figures, listed, delisted;
};

/* Large: static or on the heap. */
struct memory {
    struct base base;
    unsigned refused; /* of enum memory_refusal: reading it gives -EIO */
    struct {
        size_t words;
        size_t chunks;
        size_t entries;
    } read;                                 /* how often; refused ones too */
    struct memory_word words[MEMORY_WORDS]; /* by number */
    bool has_tag[MEMORY_TAGS];
    struct model_tag tags[MEMORY_TAGS];
    struct memory_figures figures[MODEL_FIGURES_KINDS][MEMORY_FIGURES];
    struct worklist_entry entries[MEMORY_ENTRIES]; /* in no order */
    size_t entry_count;
    struct model_totals totals;
    struct memory_parts out; /* by the last memory_take */
};

/* --- as a base ----------------------------------------------------------------------------------
 */

static inline int memory_read_word(void *user, const char *term, size_t term_bytes,
                                   struct base_word *ret_word)
{
    struct memory *memory = user;
    memory->read.words++;
    if (memory->refused & MEMORY_NO_WORD) {
        return -EIO;
    }
    for (uint32_t number = 0; number < MEMORY_WORDS; number++) {
        const struct memory_word *kept = &memory->words[number];
        if (kept->is_set && strlen(kept->term) == term_bytes &&
            memcmp(kept->term, term, term_bytes) == 0) {
            *ret_word = (struct base_word){.number = number, .count = kept->count};
            return 0;
        }
    }
    return -ENOENT;
}

static inline int memory_read_chunk(void *user, uint32_t word, uint32_t number,
                                    struct base_bytes *ret_bytes)
{
    struct memory *memory = user;
    memory->read.chunks++;
    if (memory->refused & MEMORY_NO_CHUNK) {
        return -EIO;
    }
    if (word >= MEMORY_WORDS || number >= MEMORY_CHUNKS ||
        memory->words[word].chunks[number].size == 0) {
        return -ENOENT;
    }
    const struct memory_chunk *kept = &memory->words[word].chunks[number];
    *ret_bytes = (struct base_bytes){.data = kept->bytes, .size = kept->size};
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

static inline int memory_read_entry(void *user, uint64_t number, struct worklist_entry *ret_entry)
{
    struct memory *memory = user;
    memory->read.entries++;
    if (memory->refused & MEMORY_NO_ENTRY) {
        return -EIO;
    }
    const struct worklist_entry *kept = memory_find_entry(memory, number);
    if (!kept) {
        return -ENOENT;
    }
    *ret_entry = *kept;
    return 0;
}

static inline int memory_read_entry_after(void *user, uint64_t number,
                                          struct worklist_entry *ret_entry)
{
    struct memory *memory = user;
    const struct worklist_entry *next = NULL;
    memory->read.entries++;
    if (memory->refused & MEMORY_NO_ENTRY_AFTER) {
        return -EIO;
    }
    for (size_t i = 0; i < memory->entry_count; i++) {
        const struct worklist_entry *kept = &memory->entries[i];
        if (kept->number > number && (!next || kept->number < next->number)) {
            next = kept;
        }
    }
    if (!next) {
        return -ENOENT;
    }
    *ret_entry = *next;
    return 0;
}

/* In place of whatever it held. */
static inline void memory_clear(struct memory *memory)
{
    memset(memory, 0, sizeof *memory);
    memory->base = (struct base){.user = memory,
                                 .chunk = memory_read_chunk,
                                 .word = memory_read_word,
                                 .entry = memory_read_entry,
                                 .entry_after = memory_read_entry_after};
}

static inline struct memory *memory_new(void)
{
    struct memory *memory = malloc(sizeof *memory);
    assert_non_null(memory);
    memory_clear(memory);
    return memory;
}

/* --- out of the model ---------------------------------------------------------------------------
 */

static inline int memory_forget(void *user, const struct dictionary_word *word)
{
    struct memory *memory = user;
    assert_true(word->number < MEMORY_WORDS);
    assert_int_equal(word->count, 0);
    memset(&memory->words[word->number], 0, sizeof memory->words[word->number]);
    memory->out.forgotten++;
    return 0;
}

static inline int memory_put_word(void *user, const struct dictionary_word *word)
{
    struct memory *memory = user;
    assert_true(word->number < MEMORY_WORDS && word->term_bytes < MEMORY_TERM);
    struct memory_word *kept = &memory->words[word->number];
    kept->is_set = true;
    kept->count = word->count;
    memset(kept->term, 0, sizeof kept->term);
    memcpy(kept->term, word->term, word->term_bytes);
    memory->out.words++;
    return 0;
}

static inline int memory_put_chunk(void *user, const struct weights_chunk *chunk)
{
    struct memory *memory = user;
    assert_true(chunk->word < MEMORY_WORDS && chunk->number < MEMORY_CHUNKS);
    assert_true(chunk->bytes.size > 0 && chunk->bytes.size <= MEMORY_CHUNK_BYTES);
    struct memory_chunk *kept = &memory->words[chunk->word].chunks[chunk->number];
    memset(kept, 0, sizeof *kept);
    kept->size = chunk->bytes.size;
    memcpy(kept->bytes, chunk->bytes.data, chunk->bytes.size);
    memory->out.chunks++;
    return 0;
}

static inline int memory_cut_chunk(void *user, const struct weights_chunk *chunk)
{
    struct memory *memory = user;
    assert_true(chunk->word < MEMORY_WORDS && chunk->number < MEMORY_CHUNKS);
    assert_int_equal(chunk->bytes.size, 0);
    struct memory_chunk *kept = &memory->words[chunk->word].chunks[chunk->number];
    memset(kept, 0, sizeof *kept);
    memory->out.cut++;
    return 0;
}

static inline int memory_put_tag(void *user, const struct model_tag *tag)
{
    struct memory *memory = user;
    assert_true(tag->number < MEMORY_TAGS);
    memory->has_tag[tag->number] = true;
    memory->tags[tag->number] = *tag;
    memory->out.tags++;
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
    memory->out.figures++;
    return 0;
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
    memory->out.listed++;
    return 0;
}

static inline int memory_remove_entry(void *user, uint64_t number)
{
    struct memory *memory = user;
    struct worklist_entry *kept = memory_find_entry(memory, number);
    if (kept) {
        *kept = memory->entries[--memory->entry_count];
    }
    memory->out.delisted++;
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
                               .cut_chunk = memory_cut_chunk,
                               .chunk = memory_put_chunk,
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
    memory->out = (struct memory_parts){0};
    assert_int_equal(model_changes(model, &sink), 0);
}

/* All that memory_take took but the totals. */
static inline size_t memory_parts_out(const struct memory *memory)
{
    return memory->out.forgotten + memory->out.words + memory->out.cut + memory->out.chunks +
           memory->out.tags + memory->out.figures + memory->out.listed + memory->out.delisted;
}

/* Takes what has changed, and tells the model that it is stored: whoever uses the model reads
 * through this memory from then on. */
static inline void memory_store(struct memory *memory, struct model *model)
{
    memory_take(memory, model);
    model_clean(model);
}

/* What has changed is on its way: `arriving` becomes what the memory will be once it is there. */
static inline void memory_seal(const struct memory *memory, struct memory *arriving,
                               struct model *model)
{
    memcpy(arriving, memory, sizeof *arriving);
    memory_take(arriving, model);
    assert_int_equal(model_seal(model), 0);
    while (model_seal_words(model)) {
    }
}

/* It has arrived; the model is yet to be told. */
static inline void memory_arrive(struct memory *memory, const struct memory *arriving)
{
    const struct base base = memory->base;
    memcpy(memory, arriving, sizeof *memory);
    memory->base = base;
}

/* --- back into a model --------------------------------------------------------------------------
 */

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

/* Into a new model, which reads the rest through the memory. */
static inline void memory_restore(const struct memory *memory, struct model *model)
{
    for (uint32_t tag = 0; tag < MEMORY_TAGS; tag++) {
        if (memory->has_tag[tag]) {
            assert_int_equal(model_restore_tag(model, &memory->tags[tag]), 0);
        }
    }
    memory_restore_figures(memory, model);
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

/* The cell of a word and tag in a lane of so many, as cell.h codes it; 0: there is no weight. */
static inline uint32_t memory_weight(const struct memory_word *word, uint32_t tag, size_t lanes,
                                     enum weights_lane lane)
{
    for (size_t c = 0; c < MEMORY_CHUNKS; c++) {
        const struct memory_chunk *chunk = &word->chunks[c];
        uint32_t posting[1 + WEIGHTS_LANES];
        size_t bytes = (1 + lanes) * sizeof *posting;
        assert_int_equal(chunk->size % bytes, 0);
        for (size_t at = 0; at < chunk->size; at += bytes) {
            memcpy(posting, chunk->bytes + at, bytes);
            if (posting[0] == tag) {
                return posting[1 + lane];
            }
        }
    }
    return 0;
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
    for (size_t i = 0; i < MEMORY_WORDS; i++) {
        const struct memory_word *word = &one->words[i];
        const struct memory_word *same = &other->words[i];
        assert_int_equal(word->is_set, same->is_set);
        assert_string_equal(word->term, same->term);
        assert_int_equal(word->count, same->count);
        for (size_t c = 0; c < MEMORY_CHUNKS; c++) {
            assert_int_equal(word->chunks[c].size, same->chunks[c].size);
            assert_memory_equal(word->chunks[c].bytes, same->chunks[c].bytes, MEMORY_CHUNK_BYTES);
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

/* Two stores hold the same to the last bit, the numbers of the words included; the order of the
 * entries may differ. */
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
