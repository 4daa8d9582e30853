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

#endif
