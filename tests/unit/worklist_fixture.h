/*
 * worklist_fixture: a worklist over a base, and entries that can be told apart. For cmocka tests.
 */
#ifndef UNDERTAG_TESTS_WORKLIST_FIXTURE_H
#define UNDERTAG_TESTS_WORKLIST_FIXTURE_H

#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/learner/worklist.h"
#include "tests/unit/fake_base.h"
#include "tests/unit/near.h"

struct listing {
    struct worklist *worklist;
    struct fake_base stored;
};

static inline void listing_init(struct listing *listing)
{
    fake_base_init(&listing->stored);
    assert_int_equal(worklist_new(&listing->worklist), 0);
}

static inline void listing_deinit(struct listing *listing)
{
    worklist_free(listing->worklist);
    fake_base_deinit(&listing->stored);
}

static inline int set_up_listing(void **state)
{
    struct listing *listing = calloc(1, sizeof *listing);
    assert_non_null(listing);
    listing_init(listing);
    *state = listing;
    return 0;
}

static inline int tear_down_listing(void **state)
{
    listing_deinit(*state);
    free(*state);
    return 0;
}

/* Scored when the model stood at `scored`; one gap, so that entries can be told apart. */
static inline struct worklist_entry entry_of(uint64_t number, uint64_t scored)
{
    return (struct worklist_entry){.number = number,
                                   .scored = scored,
                                   .gap_count = 1,
                                   .gaps = {{.tag = (uint32_t)(number % 1000U), .score = -0.5F}}};
}

static inline void put(struct listing *listing, uint64_t number, uint64_t scored)
{
    struct worklist_entry entry = entry_of(number, scored);
    assert_int_equal(worklist_put(listing->worklist, &listing->stored.base, &entry), 0);
}

static inline void take_out(struct listing *listing, uint64_t number)
{
    assert_int_equal(worklist_remove(listing->worklist, &listing->stored.base, number), 0);
}

static inline void store(struct listing *listing)
{
    fake_base_store(&listing->stored, listing->worklist);
}

static inline int find(const struct listing *listing, uint64_t number,
                       struct worklist_entry *ret_entry)
{
    return worklist_find(listing->worklist, &listing->stored.base, number, ret_entry);
}

static inline int next_after(const struct listing *listing, uint64_t number,
                             struct worklist_entry *ret_entry)
{
    return worklist_after(listing->worklist, &listing->stored.base, number, ret_entry);
}

static inline int next_stale(const struct listing *listing, uint64_t scored,
                             struct worklist_entry *ret_entry)
{
    return worklist_next_stale(listing->worklist, &listing->stored.base, scored, ret_entry);
}

static inline void assert_is_entry(const struct worklist_entry *entry, uint64_t number,
                                   uint64_t scored)
{
    assert_true(entry->number == number);
    assert_true(entry->scored == scored);
    assert_int_equal(entry->gap_count, 1);
    assert_int_equal(entry->gaps[0].tag, number % 1000U);
}

static inline void assert_holds(const struct listing *listing, uint64_t number, uint64_t scored)
{
    struct worklist_entry entry;
    assert_int_equal(find(listing, number, &entry), 0);
    assert_is_entry(&entry, number, scored);
}

static inline void assert_lacks(const struct listing *listing, uint64_t number)
{
    struct worklist_entry entry;
    assert_int_equal(find(listing, number, &entry), -ENOENT);
}

static inline void assert_size(const struct listing *listing, size_t size)
{
    assert_int_equal(worklist_size(listing->worklist), size);
}

static inline void assert_stale(const struct listing *listing, uint64_t scored, size_t count)
{
    assert_int_equal(worklist_count_stale(listing->worklist, scored), count);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up_listing, tear_down_listing)

#endif
