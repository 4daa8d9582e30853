#include "daemon/text/dictionary.h"

#include <errno.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/grow.h"

struct entry {
    char *term; /* NULL: the number is free */
    uint32_t bytes;
    uint32_t count;
    uint64_t hash;
};

/*
 * An open-addressing table of numbers (1 + word, 0 empty) with linear probing, at most two thirds
 * full; removal moves later members of the run back, so there are no tombstones.
 */
struct dictionary {
    struct siphash_key key;
    struct entry *entries;
    size_t entry_capacity;
    size_t entries_used; /* numbers given out so far, free ones included */
    uint32_t *free_words;
    size_t free_count;
    size_t free_capacity;
    uint32_t *table;
    size_t table_size; /* a power of two */
    size_t size;
    uint64_t term_bytes;
};

enum {
    FIRST_TABLE_SIZE = 1024
};

int dictionary_new(const struct siphash_key *key, struct dictionary **ret_dictionary)
{
    struct dictionary *made = calloc(1, sizeof *made);
    if (!made) {
        return -ENOMEM;
    }
    made->key = *key;
    made->table_size = FIRST_TABLE_SIZE;
    made->table = calloc(made->table_size, sizeof *made->table);
    if (!made->table) {
        free(made);
        return -ENOMEM;
    }
    *ret_dictionary = made;
    return 0;
}

void dictionary_free(struct dictionary *dictionary)
{
    if (!dictionary) {
        return;
    }
    for (size_t i = 0; i < dictionary->entries_used; i++) {
        free(dictionary->entries[i].term);
    }
    free(dictionary->entries);
    free(dictionary->free_words);
    free(dictionary->table);
    free(dictionary);
}

/* The slot that holds the term, or the empty one where it would go. */
static size_t find_slot(const struct dictionary *dictionary, uint64_t hash, const char *term,
                        size_t bytes)
{
    size_t mask = dictionary->table_size - 1;
    size_t slot = (size_t)hash & mask;
    while (dictionary->table[slot] != 0) {
        const struct entry *entry = &dictionary->entries[dictionary->table[slot] - 1];
        if (entry->hash == hash && entry->bytes == bytes && memcmp(entry->term, term, bytes) == 0) {
            break;
        }
        slot = (slot + 1) & mask;
    }
    return slot;
}

uint32_t dictionary_find(const struct dictionary *dictionary, const char *term, size_t bytes)
{
    uint64_t hash = siphash(&dictionary->key, term, bytes);
    return dictionary->table[find_slot(dictionary, hash, term, bytes)] - 1; /* 0 - 1 is NONE */
}

static int enlarge_table(struct dictionary *dictionary)
{
    size_t size = dictionary->table_size * 2;
    uint32_t *table = calloc(size, sizeof *table);
    if (!table) {
        return -ENOMEM;
    }
    for (size_t i = 0; i < dictionary->table_size; i++) {
        if (dictionary->table[i] == 0) {
            continue;
        }
        size_t slot = (size_t)dictionary->entries[dictionary->table[i] - 1].hash & (size - 1);
        while (table[slot] != 0) {
            slot = (slot + 1) & (size - 1);
        }
        table[slot] = dictionary->table[i];
    }
    free(dictionary->table);
    dictionary->table = table;
    dictionary->table_size = size;
    return 0;
}

/* Puts a term that is not there under a number that is free, and into the table. */
static int place(struct dictionary *dictionary, const char *term, size_t bytes, uint64_t hash,
                 uint32_t word)
{
    if ((dictionary->size + 1) * 3 > dictionary->table_size * 2 && enlarge_table(dictionary) < 0) {
        return -ENOMEM;
    }
    if (GROW(&dictionary->entries, &dictionary->entry_capacity, (size_t)word + 1) < 0) {
        return -ENOMEM;
    }
    char *copy = malloc(bytes ? bytes : 1);
    if (!copy) {
        return -ENOMEM;
    }
    memcpy(copy, term, bytes);
    dictionary->entries[word] =
        (struct entry){.term = copy, .bytes = (uint32_t)bytes, .count = 0, .hash = hash};
    dictionary->table[find_slot(dictionary, hash, term, bytes)] = word + 1;
    dictionary->size++;
    dictionary->term_bytes += bytes;
    return 0;
}

int dictionary_intern(struct dictionary *dictionary, const char *term, size_t bytes,
                      uint32_t *ret_word)
{
    uint64_t hash = siphash(&dictionary->key, term, bytes);
    uint32_t found = dictionary->table[find_slot(dictionary, hash, term, bytes)];
    if (found != 0) {
        *ret_word = found - 1;
        return 0;
    }
    bool reuse = dictionary->free_count > 0;
    if (!reuse && dictionary->entries_used >= DICTIONARY_NONE - 1) {
        return -ENOMEM;
    }
    uint32_t word = reuse ? dictionary->free_words[dictionary->free_count - 1]
                          : (uint32_t)dictionary->entries_used;
    if (place(dictionary, term, bytes, hash, word) < 0) {
        return -ENOMEM;
    }
    if (reuse) {
        dictionary->free_count--;
    } else {
        dictionary->entries_used++;
    }
    *ret_word = word;
    return 0;
}

int dictionary_restore(struct dictionary *dictionary, const char *term, size_t bytes, uint32_t word,
                       uint32_t count)
{
    bool taken = word < dictionary->entries_used && dictionary->entries[word].term;
    if (word == DICTIONARY_NONE || taken ||
        dictionary_find(dictionary, term, bytes) != DICTIONARY_NONE) {
        return -EINVAL;
    }
    if (place(dictionary, term, bytes, siphash(&dictionary->key, term, bytes), word) < 0) {
        return -ENOMEM;
    }
    dictionary->entries[word].count = count;
    if (word >= dictionary->entries_used) {
        dictionary->entries_used = (size_t)word + 1;
    }
    return 0;
}

static int add_free(struct dictionary *dictionary, uint32_t word)
{
    if (GROW(&dictionary->free_words, &dictionary->free_capacity, dictionary->free_count + 1) < 0) {
        return -ENOMEM;
    }
    dictionary->free_words[dictionary->free_count++] = word;
    return 0;
}

int dictionary_restored(struct dictionary *dictionary)
{
    for (size_t i = dictionary->entries_used; i > 0; i--) {
        if (!dictionary->entries[i - 1].term && add_free(dictionary, (uint32_t)(i - 1)) < 0) {
            return -ENOMEM;
        }
    }
    return 0;
}

/* Empties a slot and closes the gap: a later member of the run moves back when it may lie there. */
static void empty_slot(struct dictionary *dictionary, size_t slot)
{
    size_t mask = dictionary->table_size - 1;
    size_t next = slot;
    for (;;) {
        next = (next + 1) & mask;
        uint32_t member = dictionary->table[next];
        if (member == 0) {
            break;
        }
        size_t home = (size_t)dictionary->entries[member - 1].hash & mask;
        if (((next - home) & mask) >= ((next - slot) & mask)) {
            dictionary->table[slot] = member;
            slot = next;
        }
    }
    dictionary->table[slot] = 0;
}

int dictionary_remove(struct dictionary *dictionary, uint32_t word)
{
    struct entry *entry = &dictionary->entries[word];
    if (add_free(dictionary, word) < 0) {
        return -ENOMEM;
    }
    empty_slot(dictionary, find_slot(dictionary, entry->hash, entry->term, entry->bytes));
    dictionary->size--;
    dictionary->term_bytes -= entry->bytes;
    free(entry->term);
    *entry = (struct entry){0};
    return 0;
}

uint32_t dictionary_count(const struct dictionary *dictionary, uint32_t word)
{
    return dictionary->entries[word].count;
}

void dictionary_set_count(struct dictionary *dictionary, uint32_t word, uint32_t count)
{
    dictionary->entries[word].count = count;
}

const char *dictionary_term(const struct dictionary *dictionary, uint32_t word, size_t *ret_bytes)
{
    *ret_bytes = dictionary->entries[word].bytes;
    return dictionary->entries[word].term;
}

size_t dictionary_size(const struct dictionary *dictionary)
{
    return dictionary->size;
}

uint64_t dictionary_bytes(const struct dictionary *dictionary)
{
    return sizeof *dictionary + dictionary->entry_capacity * sizeof *dictionary->entries +
           dictionary->table_size * sizeof *dictionary->table +
           dictionary->free_capacity * sizeof *dictionary->free_words + dictionary->term_bytes;
}
