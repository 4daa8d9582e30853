/*
 * dictionary_fixture: a dictionary over a base that is a list of terms in memory, and what the
 * dictionary told that list when it was stored last. For cmocka tests.
 */
#ifndef UNDERTAG_TESTS_DICTIONARY_FIXTURE_H
#define UNDERTAG_TESTS_DICTIONARY_FIXTURE_H

#include <errno.h>
#include <stdbool.h>
#include <string.h>

#include "daemon/text/dictionary.h"
#include "tests/unit/near.h"

enum {
    LISTED_ROOM = 512,
    TOLD_ROOM = 2048,
    TERM_ROOM = 16
};

struct listed_word {
    char term[TERM_ROOM]; /* zero behind it, so that records may be compared as bytes */
    uint32_t number;
    uint32_t count;
    uint32_t is_gone;
};

struct list {
    struct listed_word words[LISTED_ROOM];
    size_t count;
    struct listed_word told[TOLD_ROOM]; /* when it was stored last */
    size_t told_count;
    size_t lookups;
    int error; /* what a lookup fails with; 0: it does not */
};

struct fixture {
    struct dictionary *dictionary;
    struct list *list;
    struct base base;
};

static const struct siphash_key FIXTURE_KEY = {11, 22};

/* --- the list -----------------------------------------------------------------------------------
 */

/* The place of a term, or the one behind the last. */
static inline size_t list_place(const struct list *list, const char *term, size_t bytes)
{
    size_t place = 0;
    while (place < list->count && (strlen(list->words[place].term) != bytes ||
                                   memcmp(list->words[place].term, term, bytes) != 0)) {
        place++;
    }
    return place;
}

static inline int list_word(void *user, const char *term, size_t bytes, struct base_word *ret_word)
{
    struct list *list = user;
    list->lookups++;
    if (list->error < 0) {
        return list->error;
    }
    size_t place = list_place(list, term, bytes);
    if (place == list->count) {
        return -ENOENT;
    }
    *ret_word =
        (struct base_word){.number = list->words[place].number, .count = list->words[place].count};
    return 0;
}

static inline struct listed_word *list_tell(struct list *list, const struct dictionary_word *word)
{
    assert_true(list->told_count < TOLD_ROOM && word->term_bytes < TERM_ROOM);
    struct listed_word *told = &list->told[list->told_count++];
    *told = (struct listed_word){.number = word->number, .count = word->count};
    memcpy(told->term, word->term, word->term_bytes);
    return told;
}

static inline int list_put(void *user, const struct dictionary_word *word)
{
    struct list *list = user;
    size_t place = list_place(list, word->term, word->term_bytes);
    assert_true(place < LISTED_ROOM);
    list->words[place] = *list_tell(list, word);
    list->count += place == list->count ? 1 : 0;
    return 0;
}

static inline int list_gone(void *user, const struct dictionary_word *word)
{
    struct list *list = user;
    list_tell(list, word)->is_gone = 1;
    size_t place = list_place(list, word->term, word->term_bytes);
    if (place < list->count) {
        list->words[place] = list->words[--list->count];
    }
    return 0;
}

/* --- the dictionary over it ---------------------------------------------------------------------
 */

static inline int fixture_init(struct fixture *fixture, const struct siphash_key *key)
{
    fixture->list = test_calloc(1, sizeof *fixture->list);
    fixture->base = (struct base){.user = fixture->list, .word = list_word};
    return fixture->list ? dictionary_new(key, &fixture->dictionary) : -1;
}

static inline void fixture_deinit(struct fixture *fixture)
{
    dictionary_free(fixture->dictionary);
    test_free(fixture->list);
}

static inline int fixture_set_up(void **state)
{
    static struct fixture fixture;
    *state = &fixture;
    return fixture_init(&fixture, &FIXTURE_KEY);
}

static inline int fixture_tear_down(void **state)
{
    fixture_deinit(*state);
    return 0;
}

static inline uint32_t intern(struct fixture *fixture, const char *term)
{
    uint32_t word = DICTIONARY_NONE;
    assert_int_equal(
        dictionary_intern(fixture->dictionary, &fixture->base, term, strlen(term), &word), 0);
    return word;
}

/* A word that `count` items hold. */
static inline uint32_t intern_counted(struct fixture *fixture, const char *term, uint32_t count)
{
    uint32_t word = intern(fixture, term);
    dictionary_set_count(fixture->dictionary, word, count);
    return word;
}

/* What is found through a base, or {DICTIONARY_NONE, 0}. */
static inline struct base_word find_through(const struct fixture *fixture, const struct base *base,
                                            const char *term)
{
    struct base_word found = {.number = DICTIONARY_NONE};
    int result = dictionary_find(fixture->dictionary, base, term, strlen(term), &found);
    assert_true(result == 0 || (result == -ENOENT && found.number == DICTIONARY_NONE));
    return found;
}

static inline struct base_word find(const struct fixture *fixture, const char *term)
{
    return find_through(fixture, &fixture->base, term);
}

static inline bool is_in_memory(const struct fixture *fixture, const char *term)
{
    return find_through(fixture, NULL, term).number != DICTIONARY_NONE;
}

/* Tells the list what changed; `told` is that alone. */
static inline void tell_list(struct fixture *fixture)
{
    fixture->list->told_count = 0;
    assert_int_equal(dictionary_changes(fixture->dictionary, list_put, list_gone, fixture->list),
                     0);
}

static inline void store(struct fixture *fixture)
{
    tell_list(fixture);
    dictionary_clean(fixture->dictionary);
}

static inline void assert_told(const struct fixture *fixture, size_t place, bool is_gone,
                               const char *term, uint32_t number, uint32_t count)
{
    const struct listed_word *told = &fixture->list->told[place];
    assert_true(place < fixture->list->told_count);
    assert_int_equal(told->is_gone, is_gone);
    assert_string_equal(told->term, term);
    assert_int_equal(told->number, number);
    assert_int_equal(told->count, count);
}

#endif
