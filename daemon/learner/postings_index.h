/*
 * postings_index: from a word to the places of its chunks. Private to postings.
 *
 * A table of open addressing with linear probing, at most two thirds full; what is taken out moves
 * those behind it back.
 */
#ifndef UNDERTAG_POSTINGS_INDEX_H
#define UNDERTAG_POSTINGS_INDEX_H

#include <stddef.h>
#include <stdint.h>

/* Most words have one chunk, and need no list. */
struct index_word {
    uint32_t key; /* 1 + word; 0: the slot is empty */
    uint32_t chunk_count;
    uint32_t held;     /* chunks that are in memory */
    uint32_t capacity; /* of `many`; 0: there is none */
    union {
        uint32_t one;   /* 1 + place; 0: not in memory */
        uint32_t *many; /* the same, by chunk */
    } places;
};

/* Zero-initialised is empty. */
struct postings_index {
    struct index_word *slots;
    size_t slot_count; /* 0, or a power of two */
    size_t size;
    uint64_t list_bytes;
};

void index_deinit(struct postings_index *index);
uint64_t index_bytes(const struct postings_index *index);

/* Where a key is looked for first. Fibonacci hashing: the numbers of words that came together are
 * spread. */
static inline size_t index_home(const struct postings_index *index, uint32_t key)
{
    return (size_t)(key * 0x9E3779B97F4A7C15U >> 32U) & (index->slot_count - 1);
}

/* The slot of a key, or the empty one where it would go. There are slots. */
static inline size_t index_slot(const struct postings_index *index, uint32_t key)
{
    size_t slot = index_home(index, key);
    while (index->slots[slot].key != 0 && index->slots[slot].key != key) {
        slot = (slot + 1) & (index->slot_count - 1);
    }
    return slot;
}

/* NULL where the word is not known. Valid until a word is added or removed. */
static inline struct index_word *index_find(const struct postings_index *index, uint32_t word)
{
    if (index->slot_count == 0) {
        return NULL;
    }
    struct index_word *found = &index->slots[index_slot(index, word + 1)];
    return found->key != 0 ? found : NULL;
}

/* Has the processor fetch where a word is looked for first. */
static inline void index_expect(const struct postings_index *index, uint32_t word)
{
    if (index->slot_count > 0) {
        __builtin_prefetch(&index->slots[index_home(index, word + 1)]);
    }
}

/* The word's entry, new where there is none. Returns 0 or -ENOMEM. */
int index_add(struct postings_index *index, uint32_t word, struct index_word **ret_entry)
    __attribute__((warn_unused_result));
void index_remove(struct postings_index *index, uint32_t word);

/* Makes room for one more chunk, and counts it. Returns 0 or -ENOMEM. */
int index_add_chunk(struct postings_index *index, struct index_word *entry)
    __attribute__((warn_unused_result));

static inline const uint32_t *index_places(const struct index_word *entry)
{
    return entry->capacity > 0 ? entry->places.many : &entry->places.one;
}

/* Forgets the chunks from a number on; none of them is in memory. */
void index_cut_chunks(struct index_word *entry, uint32_t from);

/* Notes where a chunk is: 1 + place, or 0 for nowhere. */
void index_set_place(struct index_word *entry, uint32_t number, uint32_t place);

#endif
