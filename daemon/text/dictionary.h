/*
 * dictionary: the terms that some item holds, each with a number and the count of the items that
 * hold it. Only some of them are in memory: what changed since everything was stored last, and what
 * was wanted lately; the rest is read from the base when it is wanted. A term that no item holds
 * any more is forgotten. Numbers rise from 0 and are never given out twice, so a term that was
 * forgotten and comes again has another one.
 *
 * What a word's number and count are, and whether it is known, follow from the sequence of
 * dictionary_intern, _set_count and _remove alone: never from what is in memory, the secret key or
 * when things were stored.
 *
 * A `base` is always what was stored when the dictionary was cleaned last (see dictionary_clean);
 * NULL where nothing has been stored. Not locked: many may find while none changes.
 */
#ifndef UNDERTAG_DICTIONARY_H
#define UNDERTAG_DICTIONARY_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "daemon/base.h"
#include "daemon/text/siphash.h"

struct dictionary;

#define DICTIONARY_NONE UINT32_MAX

enum {
    DICTIONARY_TRIM = 1024,
    DICTIONARY_STEP = 2048 /* words sealed, or stored, at a time */
};

/* To be stored beside the words, and put back at a start. */
struct dictionary_totals {
    uint32_t next_number; /* the number of the next new word; DICTIONARY_NONE: none is left */
    uint32_t size;        /* words that some item holds, in memory or not */
};

/* A word as it is told to the store. The term is not ended by NUL and is valid during the call. */
struct dictionary_word {
    const char *term;
    size_t term_bytes;
    uint32_t number;
    uint32_t count; /* 0 of a forgotten one */
    bool is_new;    /* its number has not been stored, or it is not known yet whether it has */
};

/* `key` is a secret, so that nobody can choose terms that collide. Returns 0 or -ENOMEM. */
int dictionary_new(const struct siphash_key *key, struct dictionary **ret_dictionary)
    __attribute__((warn_unused_result));
void dictionary_free(struct dictionary *dictionary);

/* The totals as of now, to be stored whenever the changes are. */
void dictionary_totals(const struct dictionary *dictionary, struct dictionary_totals *ret_totals);

/* Puts stored totals back, before anything else is done with a new dictionary: the words themselves
 * stay in the base. Returns 0, or -EINVAL where they cannot be: more words than numbers. */
int dictionary_restore_totals(struct dictionary *dictionary, const struct dictionary_totals *totals)
    __attribute__((warn_unused_result));

/* Looks a term up in memory and then, unless all words are there, in the base; admits nothing.
 * Returns 0, -ENOENT, -EIO where the base cannot be read or contradicts the dictionary, or -ENOMEM.
 */
int dictionary_find(const struct dictionary *dictionary, const struct base *base, const char *term,
                    size_t bytes, struct base_word *ret_found) __attribute__((warn_unused_result));

/*
 * The term's number; the word is in memory from now until it is removed or the dictionary trimmed.
 * A word that is not known is added with the next number and count 0, which is a change. Returns 0,
 * -EIO as above, or -ENOMEM (also when all numbers have been given out), with nothing changed.
 */
int dictionary_intern(struct dictionary *dictionary, const struct base *base, const char *term,
                      size_t bytes, uint32_t *ret_word) __attribute__((warn_unused_result));

/*
 * Of a word that is in memory because it was interned, and not removed or trimmed since. The term
 * is not ended by NUL and stays valid as long. To set a count is a change, whatever it was before.
 * To remove a word is to forget it.
 */
uint32_t dictionary_count(const struct dictionary *dictionary, uint32_t word);
void dictionary_set_count(struct dictionary *dictionary, uint32_t word, uint32_t count);
const char *dictionary_term(const struct dictionary *dictionary, uint32_t word, size_t *ret_bytes);
void dictionary_remove(struct dictionary *dictionary, uint32_t word);

/*
 * Tells what has changed and is not stored, sealed words too: first `gone` for each forgotten
 * word (it may never have been stored), in the order in which they were forgotten, then `put` for
 * each changed one, in the order in which they changed first. So a term that was forgotten and came
 * again is gone under its old number before it is put under the new one. Anything but 0 from either
 * ends it and is returned; else 0.
 */
int dictionary_changes(const struct dictionary *dictionary,
                       int (*put)(void *user, const struct dictionary_word *word),
                       int (*gone)(void *user, const struct dictionary_word *word), void *user)
    __attribute__((warn_unused_result));

/* How many words that tells of, and how many of them are forgotten or new. */
size_t dictionary_changed_count(const struct dictionary *dictionary);
size_t dictionary_changed_terms(const struct dictionary *dictionary);

/*
 * What has changed is on its way to the base, as it is now; what was sealed before and did not
 * arrive goes with it. dictionary_stored: it has arrived, and every base that is used from now on
 * has it. Each does DICTIONARY_STEP words and says whether there are more: it is called until there
 * are none, with no change in between; whoever looks words up may come in between.
 */
bool dictionary_seal(struct dictionary *dictionary);
bool dictionary_stored(struct dictionary *dictionary);

/* Both at once, for all changes. */
void dictionary_clean(struct dictionary *dictionary);

/* Lets words go that are as they are stored, those that were not interned
 * lately first, until it holds at most `bytes` or no such word is left; or until it has looked at
 * DICTIONARY_TRIM words: the next call goes on, so that none takes long. */
void dictionary_trim(struct dictionary *dictionary, uint64_t bytes);

/* Words that some item holds, in memory or not. */
size_t dictionary_size(const struct dictionary *dictionary);

/* Bytes held in memory, with what the allocator adds to each word. */
uint64_t dictionary_bytes(const struct dictionary *dictionary);

#endif
