#include "daemon/learner/postings_index.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>

enum {
    FIRST_SLOTS = 1024,
    FIRST_LIST = 4
};

void index_deinit(struct postings_index *index)
{
    for (size_t i = 0; i < index->slot_count; i++) {
        if (index->slots[i].key != 0 && index->slots[i].capacity > 0) {
            free(index->slots[i].places.many);
        }
    }
    free(index->slots);
    memset(index, 0, sizeof *index);
}

uint64_t index_bytes(const struct postings_index *index)
{
    return index->slot_count * sizeof *index->slots + index->list_bytes;
}

static int enlarge(struct postings_index *index)
{
    size_t before = index->slot_count;
    size_t after = before > 0 ? 2 * before : FIRST_SLOTS;
    struct postings_index larger = *index;
    larger.slots = calloc(after, sizeof *larger.slots);
    if (!larger.slots) {
        return -ENOMEM;
    }
    larger.slot_count = after;
    for (size_t i = 0; i < before; i++) {
        if (index->slots[i].key != 0) {
            larger.slots[index_slot(&larger, index->slots[i].key)] = index->slots[i];
        }
    }
    free(index->slots);
    *index = larger;
    return 0;
}

int index_add(struct postings_index *index, uint32_t word, struct index_word **ret_entry)
{
    *ret_entry = index_find(index, word);
    if (*ret_entry) {
        return 0;
    }
    if (3 * (index->size + 1) > 2 * index->slot_count && enlarge(index) < 0) {
        return -ENOMEM;
    }
    struct index_word *entry = &index->slots[index_slot(index, word + 1)];
    *entry = (struct index_word){.key = word + 1};
    index->size++;
    *ret_entry = entry;
    return 0;
}

void index_remove(struct postings_index *index, uint32_t word)
{
    struct index_word *entry = index_find(index, word);
    if (!entry) {
        return;
    }
    if (entry->capacity > 0) {
        index->list_bytes -= entry->capacity * sizeof *entry->places.many;
        free(entry->places.many);
    }
    index->size--;
    size_t mask = index->slot_count - 1;
    size_t slot = (size_t)(entry - index->slots);
    *entry = (struct index_word){0};
    for (size_t at = (slot + 1) & mask; index->slots[at].key != 0; at = (at + 1) & mask) {
        struct index_word moved = index->slots[at];
        index->slots[at] = (struct index_word){0};
        index->slots[index_slot(index, moved.key)] = moved;
    }
}

static int enlarge_list(struct postings_index *index, struct index_word *entry)
{
    uint32_t capacity = entry->capacity > 0 ? 2 * entry->capacity : FIRST_LIST;
    uint32_t *list = calloc(capacity, sizeof *list);
    if (!list) {
        return -ENOMEM;
    }
    memcpy(list, index_places(entry), entry->chunk_count * sizeof *list);
    if (entry->capacity > 0) {
        free(entry->places.many);
    }
    index->list_bytes += (capacity - entry->capacity) * sizeof *list;
    entry->places.many = list;
    entry->capacity = capacity;
    return 0;
}

int index_add_chunk(struct postings_index *index, struct index_word *entry)
{
    uint32_t room = entry->capacity > 0 ? entry->capacity : 1;
    if (entry->chunk_count == room && enlarge_list(index, entry) < 0) {
        return -ENOMEM;
    }
    entry->chunk_count++;
    return 0;
}

void index_cut_chunks(struct index_word *entry, uint32_t from)
{
    entry->chunk_count = from;
}

void index_set_place(struct index_word *entry, uint32_t number, uint32_t place)
{
    uint32_t *places = entry->capacity > 0 ? entry->places.many : &entry->places.one;
    entry->held += place != 0;
    entry->held -= places[number] != 0;
    places[number] = place;
}
