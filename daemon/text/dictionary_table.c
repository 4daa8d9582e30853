#include "daemon/text/dictionary_table.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>

enum {
    LEAST_SIZE = 64,
    SLOT_BYTES = sizeof(void *)
};

int dictionary_table_init(struct dictionary_table *table, enum dictionary_order order,
                          const struct siphash_key *key)
{
    struct dictionary_entry **slots = calloc(LEAST_SIZE, SLOT_BYTES);
    if (!slots) {
        return -ENOMEM;
    }
    *table = (struct dictionary_table){
        .key = key, .order = order, .slots = slots, .size = LEAST_SIZE, .held = 0};
    return 0;
}

void dictionary_table_deinit(struct dictionary_table *table)
{
    free(table->slots);
    *table = (struct dictionary_table){0};
}

/* --- searching ----------------------------------------------------------------------------------
 */

uint32_t dictionary_table_hash(const struct siphash_key *key, const char *term, size_t bytes)
{
    return (uint32_t)siphash(key, term, bytes);
}

static uint32_t hash_of_number(const struct dictionary_table *table, uint32_t number)
{
    return (uint32_t)siphash(table->key, &number, sizeof number);
}

/* Where the search for an entry begins. */
static size_t home_of(const struct dictionary_table *table, const struct dictionary_entry *entry)
{
    uint32_t hash =
        table->order == DICTIONARY_BY_TERM ? entry->hash : hash_of_number(table, entry->number);
    return hash & (table->size - 1);
}

struct dictionary_entry *dictionary_table_find_term(const struct dictionary_table *table,
                                                    uint32_t hash, const char *term, size_t bytes)
{
    const size_t mask = table->size - 1;
    for (size_t slot = hash & mask; table->slots[slot]; slot = (slot + 1) & mask) {
        struct dictionary_entry *entry = table->slots[slot];
        if (entry->hash == hash && entry->bytes == bytes && memcmp(entry->term, term, bytes) == 0) {
            return entry;
        }
    }
    return NULL;
}

struct dictionary_entry *dictionary_table_find_number(const struct dictionary_table *table,
                                                      uint32_t number)
{
    const size_t mask = table->size - 1;
    size_t slot = hash_of_number(table, number) & mask;
    while (table->slots[slot] && table->slots[slot]->number != number) {
        slot = (slot + 1) & mask;
    }
    return table->slots[slot];
}

/* --- coming and going ---------------------------------------------------------------------------
 */

static void put_in(struct dictionary_table *table, struct dictionary_entry *entry)
{
    size_t slot = home_of(table, entry);
    while (table->slots[slot]) {
        slot = (slot + 1) & (table->size - 1);
    }
    table->slots[slot] = entry;
}

static int resize(struct dictionary_table *table, size_t size)
{
    struct dictionary_table resized = *table;
    resized.size = size;
    resized.slots = calloc(size, SLOT_BYTES);
    if (!resized.slots) {
        return -ENOMEM;
    }
    for (size_t i = 0; i < table->size; i++) {
        if (table->slots[i]) {
            put_in(&resized, table->slots[i]);
        }
    }
    free(table->slots);
    *table = resized;
    return 0;
}

int dictionary_table_reserve(struct dictionary_table *table)
{
    bool has_room = (table->held + 1) * 3 <= table->size * 2;
    return has_room ? 0 : resize(table, table->size * 2);
}

void dictionary_table_add(struct dictionary_table *table, struct dictionary_entry *entry)
{
    put_in(table, entry);
    table->held++;
}

/* Empties a slot and closes the gap: a later member of the run moves back when it may lie there, so
 * that a search may end at the first empty slot. */
static void empty_slot(struct dictionary_table *table, size_t slot)
{
    const size_t mask = table->size - 1;
    for (size_t next = (slot + 1) & mask; table->slots[next]; next = (next + 1) & mask) {
        size_t home = home_of(table, table->slots[next]);
        if (((next - home) & mask) >= ((next - slot) & mask)) {
            table->slots[slot] = table->slots[next];
            slot = next;
        }
    }
    table->slots[slot] = NULL;
}

void dictionary_table_take_out(struct dictionary_table *table, const struct dictionary_entry *entry)
{
    size_t slot = home_of(table, entry);
    while (table->slots[slot] && table->slots[slot] != entry) {
        slot = (slot + 1) & (table->size - 1);
    }
    if (!table->slots[slot]) {
        return;
    }
    empty_slot(table, slot);
    table->held--;
    if (table->size > LEAST_SIZE && table->held * 4 < table->size) {
        (void)resize(table, table->size / 2); /* without memory it only stays larger */
    }
}

uint64_t dictionary_table_bytes(const struct dictionary_table *table)
{
    return table->size * SLOT_BYTES;
}
