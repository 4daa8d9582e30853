/*
 * fake_base: a base that is an array of the worklist's entries, by number. It counts what is read,
 * and can refuse to be read. For cmocka tests.
 */
#ifndef UNDERTAG_TESTS_FAKE_BASE_H
#define UNDERTAG_TESTS_FAKE_BASE_H

#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/base.h"
#include "daemon/grow.h"
#include "daemon/learner/worklist.h"
#include "tests/unit/near.h"

struct fake_base {
    struct base base;
    struct worklist_entry *entries; /* by number */
    size_t count;
    size_t capacity;
    size_t reads;
    int error; /* what reading gives; 0: the entries */
};

/* The place of the first entry with that number or a greater one. */
static inline size_t fake_base_place(const struct fake_base *fake, uint64_t number)
{
    size_t low = 0;
    size_t high = fake->count;
    while (low < high) {
        size_t middle = low + (high - low) / 2;
        if (fake->entries[middle].number < number) {
            low = middle + 1;
        } else {
            high = middle;
        }
    }
    return low;
}

static inline bool fake_base_holds(const struct fake_base *fake, size_t place, uint64_t number)
{
    return place < fake->count && fake->entries[place].number == number;
}

static inline int fake_base_entry(void *user, uint64_t number, struct worklist_entry *ret_entry)
{
    struct fake_base *fake = user;
    fake->reads++;
    size_t place = fake_base_place(fake, number);
    if (fake->error != 0 || !fake_base_holds(fake, place, number)) {
        return fake->error != 0 ? fake->error : -ENOENT;
    }
    *ret_entry = fake->entries[place];
    return 0;
}

static inline int fake_base_entry_after(void *user, uint64_t number,
                                        struct worklist_entry *ret_entry)
{
    struct fake_base *fake = user;
    fake->reads++;
    size_t place = fake_base_place(fake, number);
    place += fake_base_holds(fake, place, number);
    if (fake->error != 0 || place == fake->count) {
        return fake->error != 0 ? fake->error : -ENOENT;
    }
    *ret_entry = fake->entries[place];
    return 0;
}

static inline void fake_base_init(struct fake_base *fake)
{
    *fake = (struct fake_base){
        .base = {.user = fake, .entry = fake_base_entry, .entry_after = fake_base_entry_after}};
}

static inline void fake_base_deinit(struct fake_base *fake)
{
    free(fake->entries);
}

static inline int fake_base_put(void *user, const struct worklist_entry *entry)
{
    struct fake_base *fake = user;
    size_t place = fake_base_place(fake, entry->number);
    if (!fake_base_holds(fake, place, entry->number)) {
        assert_int_equal(GROW(&fake->entries, &fake->capacity, fake->count + 1), 0);
        memmove(&fake->entries[place + 1], &fake->entries[place],
                (fake->count - place) * sizeof *fake->entries);
        fake->count++;
    }
    fake->entries[place] = *entry;
    return 0;
}

/* Only what is stored is said to be gone. */
static inline int fake_base_gone(void *user, uint64_t number)
{
    struct fake_base *fake = user;
    size_t place = fake_base_place(fake, number);
    assert_true(fake_base_holds(fake, place, number));
    fake->count--;
    memmove(&fake->entries[place], &fake->entries[place + 1],
            (fake->count - place) * sizeof *fake->entries);
    return 0;
}

/* Moves what has changed into the base, as when a model is stored. */
static inline void fake_base_store(struct fake_base *fake, struct worklist *worklist)
{
    assert_int_equal(worklist_changes(worklist, fake_base_put, fake_base_gone, fake), 0);
    worklist_clean(worklist);
}

/* --- chunks -------------------------------------------------------------------------------------
 */

struct fake_chunk {
    uint64_t key; /* word and number */
    unsigned char *block;
    size_t size; /* of what lies one byte into the block */
};

/* A base of chunks alone. Its bytes are aligned for nothing, as those of a store may be. */
struct fake_chunks {
    struct base base;
    struct fake_chunk *list; /* by word and number */
    size_t count;
    size_t capacity;
    size_t reads;
    int error; /* what reading gives; 0: the chunks */
};

/* The place of the first chunk with that word and number or behind them. */
static inline size_t fake_chunks_place(const struct fake_chunks *fake, uint32_t word,
                                       uint32_t number)
{
    uint64_t key = (uint64_t)word << 32U | number;
    size_t low = 0;
    size_t high = fake->count;
    while (low < high) {
        size_t middle = low + (high - low) / 2;
        if (fake->list[middle].key < key) {
            low = middle + 1;
        } else {
            high = middle;
        }
    }
    return low;
}

static inline bool fake_chunks_hold(const struct fake_chunks *fake, uint32_t word, uint32_t number)
{
    size_t place = fake_chunks_place(fake, word, number);
    return place < fake->count && fake->list[place].key == ((uint64_t)word << 32U | number);
}

static inline int fake_chunks_chunk(void *user, uint32_t word, uint32_t number,
                                    struct base_bytes *ret_bytes)
{
    struct fake_chunks *fake = user;
    fake->reads++;
    if (fake->error != 0 || !fake_chunks_hold(fake, word, number)) {
        return fake->error != 0 ? fake->error : -ENOENT;
    }
    const struct fake_chunk *chunk = &fake->list[fake_chunks_place(fake, word, number)];
    *ret_bytes = (struct base_bytes){.data = chunk->block + 1, .size = chunk->size};
    return 0;
}

static inline void fake_chunks_init(struct fake_chunks *fake)
{
    *fake = (struct fake_chunks){.base = {.chunk = fake_chunks_chunk}};
    fake->base.user = fake;
}

/* Takes out so many chunks, from that number on. */
static inline void fake_chunks_cut(struct fake_chunks *fake, uint32_t word, uint32_t number,
                                   size_t count)
{
    size_t place = fake_chunks_place(fake, word, number);
    assert_true(place + count <= fake->count);
    for (size_t i = 0; i < count; i++) {
        free(fake->list[place + i].block);
    }
    memmove(&fake->list[place], &fake->list[place + count],
            (fake->count - place - count) * sizeof *fake->list);
    fake->count -= count;
}

static inline void fake_chunks_forget_word(struct fake_chunks *fake, uint32_t word)
{
    size_t count = fake_chunks_place(fake, word + 1, 0) - fake_chunks_place(fake, word, 0);
    if (count > 0) {
        fake_chunks_cut(fake, word, 0, count);
    }
}

static inline void fake_chunks_put(struct fake_chunks *fake, uint32_t word, uint32_t number,
                                   const void *data, size_t size)
{
    if (fake_chunks_hold(fake, word, number)) {
        fake_chunks_cut(fake, word, number, 1);
    }
    size_t place = fake_chunks_place(fake, word, number);
    unsigned char *block = malloc(size + 1);
    assert_non_null(block);
    assert_int_equal(GROW(&fake->list, &fake->capacity, fake->count + 1), 0);
    memmove(&fake->list[place + 1], &fake->list[place], (fake->count - place) * sizeof *fake->list);
    memcpy(block + 1, data, size);
    fake->list[place] =
        (struct fake_chunk){.key = (uint64_t)word << 32U | number, .block = block, .size = size};
    fake->count++;
}

static inline void fake_chunks_deinit(struct fake_chunks *fake)
{
    for (size_t i = 0; i < fake->count; i++) {
        free(fake->list[i].block);
    }
    free(fake->list);
    *fake = (struct fake_chunks){0};
}

#endif
