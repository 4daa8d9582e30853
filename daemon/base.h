/*
 * base: the model as it was stored last, as the learner reads it. What has changed since then lies
 * in memory above it (weights, dictionary and worklist each keep their own part); what has not is
 * read from the base when it is wanted, and need not be in memory at all.
 *
 * The learner knows no store, so the base is a set of functions. Each thread reads through a base
 * of its own, which its owner keeps at one moment while anything is computed. A NULL base is one
 * in which nothing has been stored.
 */
#ifndef UNDERTAG_BASE_H
#define UNDERTAG_BASE_H

#include <stddef.h>
#include <stdint.h>

struct worklist_entry;

/* Bytes of the base's own; valid until the next are read, or its owner moves it on. */
struct base_bytes {
    const unsigned char *data;
    size_t size;
};

struct base_word {
    uint32_t number;
    uint32_t count; /* items that hold the word */
};

/* Each function returns 0, -ENOENT where there is no such thing, -EIO where it cannot be read or is
 * damaged, or -ENOMEM. */
struct base {
    void *user;
    /* A chunk of a word's postings, by its number from 0; fastest in rising order. */
    int (*chunk)(void *user, uint32_t word, uint32_t number, struct base_bytes *ret_bytes);
    int (*word)(void *user, const char *term, size_t term_bytes, struct base_word *ret_word);
    /* An item's entry in the worklist, and the first one with a number greater than that. */
    int (*entry)(void *user, uint64_t number, struct worklist_entry *ret_entry);
    int (*entry_after)(void *user, uint64_t number, struct worklist_entry *ret_entry);
};

#endif
