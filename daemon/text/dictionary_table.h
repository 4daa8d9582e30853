/*
 * dictionary_table: the dictionary's words, found by their terms or by their numbers. The words are
 * the dictionary's own; a table only points to them, and the same word may be in two tables.
 *
 * An open-addressing table with linear probing, from a quarter to two thirds full: it grows and
 * shrinks with what it holds. Hashes are keyed with a secret, so that nobody can choose words that
 * collide; no result depends on them.
 */
#ifndef UNDERTAG_DICTIONARY_TABLE_H
#define UNDERTAG_DICTIONARY_TABLE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "daemon/text/siphash.h"

/* Each word is on the dictionary's list of its state. */
enum dictionary_state {
    DICTIONARY_CLEAN, /* as the base has it */
    DICTIONARY_CHANGED,
    DICTIONARY_FORGOTTEN,
    DICTIONARY_SEALED,  /* was changed, and is on its way to the base */
    DICTIONARY_LEAVING, /* was forgotten, and is on its way out of the base */
    DICTIONARY_STATES
};

struct dictionary_entry {
    struct dictionary_entry *before; /* on the list of its state */
    struct dictionary_entry *after;
    size_t bytes; /* of the term */
    uint32_t hash;
    uint32_t number;
    uint32_t count;
    unsigned char state;
    bool is_stored; /* the base has its number */
    bool is_recent; /* interned again since it came or since trimming passed over it */
    char term[];
};

enum dictionary_order {
    DICTIONARY_BY_TERM,
    DICTIONARY_BY_NUMBER
};

struct dictionary_table {
    const struct siphash_key *key; /* not owned */
    enum dictionary_order order;
    struct dictionary_entry **slots; /* NULL: empty */
    size_t size;                     /* of slots; a power of two */
    size_t held;
};

/* Returns 0 or -ENOMEM. */
int dictionary_table_init(struct dictionary_table *table, enum dictionary_order order,
                          const struct siphash_key *key) __attribute__((warn_unused_result));
void dictionary_table_deinit(struct dictionary_table *table);

/* The hash that an entry keeps of its term. */
uint32_t dictionary_table_hash(const struct siphash_key *key, const char *term, size_t bytes);

/* Of a table by term; NULL where it is not there. */
struct dictionary_entry *dictionary_table_find_term(const struct dictionary_table *table,
                                                    uint32_t hash, const char *term, size_t bytes);

/* Of a table by number; NULL where it is not there. */
struct dictionary_entry *dictionary_table_find_number(const struct dictionary_table *table,
                                                      uint32_t number);

/* Makes room for one more. Returns 0 or -ENOMEM, with nothing changed. */
int dictionary_table_reserve(struct dictionary_table *table) __attribute__((warn_unused_result));

/* An entry whose term (or number) is not there, after dictionary_table_reserve; taking others out
 * in between keeps the room. */
void dictionary_table_add(struct dictionary_table *table, struct dictionary_entry *entry);

/* Takes this very entry out, if it is there. */
void dictionary_table_take_out(struct dictionary_table *table,
                               const struct dictionary_entry *entry);

/* Bytes held in memory, without the struct itself and without the entries. */
uint64_t dictionary_table_bytes(const struct dictionary_table *table);

#endif
