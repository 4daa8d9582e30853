/*
 * dictionary: the terms that some item holds, each with a small dense number and the count of the
 * items that hold it. A term that no item holds any more is forgotten and its number used again.
 *
 * Numbers follow the order in which terms come and go; nothing that is computed may depend on them.
 * Not locked: many may find while none changes.
 */
#ifndef UNDERTAG_DICTIONARY_H
#define UNDERTAG_DICTIONARY_H

#include <stddef.h>
#include <stdint.h>

#include "daemon/text/siphash.h"

struct dictionary;

#define DICTIONARY_NONE UINT32_MAX

/* `key` is a secret, so that nobody can choose terms that collide. Returns 0 or -ENOMEM. */
int dictionary_new(const struct siphash_key *key, struct dictionary **ret_dictionary)
    __attribute__((warn_unused_result));
void dictionary_free(struct dictionary *dictionary);

/* The term's number, or DICTIONARY_NONE. */
uint32_t dictionary_find(const struct dictionary *dictionary, const char *term, size_t bytes);

/* The term's number; it is added with count 0 where it is not there. Returns 0 or -ENOMEM. */
int dictionary_intern(struct dictionary *dictionary, const char *term, size_t bytes,
                      uint32_t *ret_word) __attribute__((warn_unused_result));

/* Puts back a stored term under its number. Returns 0, -ENOMEM, or -EINVAL where either is taken.
 */
int dictionary_restore(struct dictionary *dictionary, const char *term, size_t bytes, uint32_t word,
                       uint32_t count) __attribute__((warn_unused_result));

/* To be called once after all dictionary_restore: numbers that none took may be given out. */
int dictionary_restored(struct dictionary *dictionary) __attribute__((warn_unused_result));

/* Forgets a word; its number is free from now on. Returns 0 or -ENOMEM, then nothing changed. */
int dictionary_remove(struct dictionary *dictionary, uint32_t word)
    __attribute__((warn_unused_result));

uint32_t dictionary_count(const struct dictionary *dictionary, uint32_t word);
void dictionary_set_count(struct dictionary *dictionary, uint32_t word, uint32_t count);

/* The term of a number in use; not ended by NUL; valid until it is removed. */
const char *dictionary_term(const struct dictionary *dictionary, uint32_t word, size_t *ret_bytes);

/* Terms held. */
size_t dictionary_size(const struct dictionary *dictionary);

/* Bytes held in memory. */
uint64_t dictionary_bytes(const struct dictionary *dictionary);

#endif
