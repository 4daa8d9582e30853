/*
 * The entries lie behind each other in no order; a table of open addressing leads from an item's
 * number to its place. What was taken out leaves its place to the last entry.
 */
#include "daemon/learner/worklist.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/grow.h"

struct worklist {
    struct worklist_entry *entries;
    uint8_t *is_changed; /* by place */
    size_t count;
    size_t capacity;
    size_t changed_capacity;
    uint32_t *table; /* 1 + place, or 0; a power of two long, at most half full */
    size_t table_size;
    uint64_t *gone;
    size_t gone_count;
    size_t gone_capacity;
    size_t turn; /* the place that is looked at next for stale scores */
};

enum {
    FIRST_TABLE = 64
};

int worklist_new(struct worklist **ret_worklist)
{
    struct worklist *made = calloc(1, sizeof *made);
    if (!made) {
        return -ENOMEM;
    }
    made->table_size = FIRST_TABLE;
    made->table = calloc(made->table_size, sizeof *made->table);
    if (!made->table) {
        free(made);
        return -ENOMEM;
    }
    *ret_worklist = made;
    return 0;
}

void worklist_free(struct worklist *worklist)
{
    if (!worklist) {
        return;
    }
    free(worklist->entries);
    free(worklist->is_changed);
    free(worklist->table);
    free(worklist->gone);
    free(worklist);
}

size_t worklist_size(const struct worklist *worklist)
{
    return worklist->count;
}

uint64_t worklist_bytes(const struct worklist *worklist)
{
    return sizeof *worklist + worklist->capacity * sizeof *worklist->entries +
           worklist->changed_capacity + worklist->table_size * sizeof *worklist->table +
           worklist->gone_capacity * sizeof *worklist->gone;
}

/* --- the table ----------------------------------------------------------------------------------
 */

/* Fibonacci hashing: numbers that follow each other are spread. */
static size_t slot_of(const struct worklist *worklist, uint64_t number)
{
    return (size_t)(number * 0x9E3779B97F4A7C15U >> 32U) & (worklist->table_size - 1);
}

/* The slot of a number, or the empty one where it would be. */
static size_t find_slot(const struct worklist *worklist, uint64_t number)
{
    size_t slot = slot_of(worklist, number);
    while (worklist->table[slot] != 0 &&
           worklist->entries[worklist->table[slot] - 1].number != number) {
        slot = (slot + 1) & (worklist->table_size - 1);
    }
    return slot;
}

static int grow_table(struct worklist *worklist)
{
    if (2 * (worklist->count + 1) <= worklist->table_size) {
        return 0;
    }
    uint32_t *grown = calloc(2 * worklist->table_size, sizeof *grown);
    if (!grown) {
        return -ENOMEM;
    }
    free(worklist->table);
    worklist->table = grown;
    worklist->table_size *= 2;
    for (size_t i = 0; i < worklist->count; i++) {
        worklist->table[find_slot(worklist, worklist->entries[i].number)] = (uint32_t)i + 1;
    }
    return 0;
}

/* Empties a slot, and moves what had to go on from it back towards its own place. */
static void empty_slot(struct worklist *worklist, size_t slot)
{
    size_t mask = worklist->table_size - 1;
    worklist->table[slot] = 0;
    for (size_t at = (slot + 1) & mask; worklist->table[at] != 0; at = (at + 1) & mask) {
        uint32_t place = worklist->table[at];
        worklist->table[at] = 0;
        worklist->table[find_slot(worklist, worklist->entries[place - 1].number)] = place;
    }
}

/* --- entries ------------------------------------------------------------------------------------
 */

const struct worklist_entry *worklist_find(const struct worklist *worklist, uint64_t number)
{
    uint32_t place = worklist->table[find_slot(worklist, number)];
    return place == 0 ? NULL : &worklist->entries[place - 1];
}

const struct worklist_entry *worklist_at(const struct worklist *worklist, size_t place)
{
    return &worklist->entries[place];
}

int worklist_put(struct worklist *worklist, const struct worklist_entry *entry)
{
    if (GROW(&worklist->entries, &worklist->capacity, worklist->count + 1) < 0 ||
        GROW(&worklist->is_changed, &worklist->changed_capacity, worklist->count + 1) < 0 ||
        grow_table(worklist) < 0) {
        return -ENOMEM;
    }
    size_t slot = find_slot(worklist, entry->number);
    if (worklist->table[slot] == 0) {
        worklist->table[slot] = (uint32_t)++worklist->count;
    }
    size_t place = worklist->table[slot] - 1;
    worklist->entries[place] = *entry;
    worklist->is_changed[place] = 1;
    return 0;
}

int worklist_remove(struct worklist *worklist, uint64_t number)
{
    size_t slot = find_slot(worklist, number);
    if (worklist->table[slot] == 0) {
        return 0;
    }
    if (GROW(&worklist->gone, &worklist->gone_capacity, worklist->gone_count + 1) < 0) {
        return -ENOMEM;
    }
    worklist->gone[worklist->gone_count++] = number;
    size_t place = worklist->table[slot] - 1;
    empty_slot(worklist, slot);
    size_t last = worklist->count - 1;
    if (place != last) {
        worklist->table[find_slot(worklist, worklist->entries[last].number)] = (uint32_t)place + 1;
        worklist->entries[place] = worklist->entries[last];
        worklist->is_changed[place] = worklist->is_changed[last];
    }
    worklist->count = last;
    return 0;
}

/* --- turns --------------------------------------------------------------------------------------
 */

const struct worklist_entry *worklist_next_stale(struct worklist *worklist, uint64_t scored)
{
    for (size_t looked_at = 0; looked_at < worklist->count; looked_at++) {
        worklist->turn = worklist->turn + 1 < worklist->count ? worklist->turn + 1 : 0;
        if (worklist->entries[worklist->turn].scored < scored) {
            return &worklist->entries[worklist->turn];
        }
    }
    return NULL;
}

size_t worklist_count_stale(const struct worklist *worklist, uint64_t scored)
{
    size_t stale = 0;
    for (size_t i = 0; i < worklist->count; i++) {
        stale += worklist->entries[i].scored < scored;
    }
    return stale;
}

/* --- storing ------------------------------------------------------------------------------------
 */

int worklist_changes(const struct worklist *worklist,
                     int (*put)(void *user, const struct worklist_entry *entry),
                     int (*gone)(void *user, uint64_t number), void *user)
{
    int result = 0;
    for (size_t i = 0; i < worklist->gone_count && result == 0; i++) {
        if (!worklist_find(worklist, worklist->gone[i])) {
            result = gone(user, worklist->gone[i]);
        }
    }
    for (size_t i = 0; i < worklist->count && result == 0; i++) {
        if (worklist->is_changed[i]) {
            result = put(user, &worklist->entries[i]);
        }
    }
    return result;
}

void worklist_clean(struct worklist *worklist)
{
    worklist->gone_count = 0;
    if (worklist->count > 0) {
        memset(worklist->is_changed, 0, worklist->count);
    }
}
