/*
 * One hash table from a term to its number in the order of first appearance. A slot is in use when
 * it carries the number of the extraction at hand, so that a small item after a large one need not
 * sweep the table. Terms stand one behind the other in one block; since it moves when it grows,
 * pointers to them are made at the end.
 */
#include "daemon/text/features.h"

#include <errno.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/grow.h"

enum {
    FIRST_SLOTS = 256
};

struct slot {
    uint32_t extraction; /* in use when it equals that of the features */
    uint32_t entry;
};

/* What `list` cannot hold yet: entry i belongs to list[i]. */
struct entry {
    uint64_t hash;
    size_t term_at; /* in `terms` */
    uint32_t in_title;
    uint32_t in_text;
    bool is_field;
};

struct features {
    struct words *words;
    double title_weight;
    struct siphash_key key;
    struct slot *slots;
    size_t slot_count; /* a power of two, at least twice `count` */
    uint32_t extraction;
    struct entry *entries;
    size_t entry_capacity;
    struct feature *list;
    size_t list_capacity;
    size_t count;
    size_t most;
    char *terms;
    size_t terms_bytes;
    size_t terms_capacity;
    bool in_title; /* the words that come now are the title's */
};

/* --- the table ---------------------------------------------------------------------------------
 */

/* The slot where the term is, or the free one where it would go. */
static struct slot *find_slot(const struct features *features, uint64_t hash, const char *term,
                              size_t bytes)
{
    size_t mask = features->slot_count - 1;
    size_t at = (size_t)hash & mask;
    for (;; at = (at + 1) & mask) {
        struct slot *slot = &features->slots[at];
        if (slot->extraction != features->extraction) {
            return slot;
        }
        const struct entry *entry = &features->entries[slot->entry];
        if (entry->hash == hash && features->list[slot->entry].term_bytes == bytes &&
            memcmp(features->terms + entry->term_at, term, bytes) == 0) {
            return slot;
        }
    }
}

/* A table twice as large with the same entries. */
static int grow_slots(struct features *features)
{
    size_t count = features->slot_count * 2;
    struct slot *slots = calloc(count, sizeof *slots);
    if (!slots) {
        return -ENOMEM;
    }
    free(features->slots);
    features->slots = slots;
    features->slot_count = count;
    for (size_t i = 0; i < features->count; i++) {
        size_t at = (size_t)features->entries[i].hash & (count - 1);
        while (slots[at].extraction == features->extraction) {
            at = (at + 1) & (count - 1);
        }
        slots[at] = (struct slot){features->extraction, (uint32_t)i};
    }
    return 0;
}

/* Adds a term that is not there. */
static int add_term(struct features *features, uint64_t hash, const struct word *word)
{
    if (features->count >= features->most || features->count >= UINT32_MAX / 2) {
        return -E2BIG;
    }
    if (GROW(&features->entries, &features->entry_capacity, features->count + 1) < 0 ||
        GROW(&features->list, &features->list_capacity, features->count + 1) < 0 ||
        GROW(&features->terms, &features->terms_capacity,
             features->terms_bytes + word->term_bytes) < 0) {
        return -ENOMEM;
    }
    if (features->slot_count < (features->count + 1) * 2 && grow_slots(features) < 0) {
        return -ENOMEM;
    }
    struct slot *slot = find_slot(features, hash, word->term, word->term_bytes);
    *slot = (struct slot){features->extraction, (uint32_t)features->count};
    memcpy(features->terms + features->terms_bytes, word->term, word->term_bytes);
    features->entries[features->count] =
        (struct entry){.hash = hash, .term_at = features->terms_bytes};
    features->list[features->count] = (struct feature){
        .term_bytes = word->term_bytes,
        .surface = word->surface,
        .surface_bytes = word->surface_bytes,
    };
    features->terms_bytes += word->term_bytes;
    features->count++;
    return 0;
}

/* The entry of a term, which is added where it is new. */
static int intern(struct features *features, const struct word *word, struct entry **ret_entry)
{
    uint64_t hash = siphash(&features->key, word->term, word->term_bytes);
    const struct slot *slot = find_slot(features, hash, word->term, word->term_bytes);
    if (slot->extraction == features->extraction) {
        *ret_entry = &features->entries[slot->entry];
        return 0;
    }
    int error = add_term(features, hash, word);
    if (error == 0) {
        *ret_entry = &features->entries[features->count - 1];
    }
    return error;
}

/* --- an extraction -----------------------------------------------------------------------------
 */

static int take_word(void *user, const struct word *word)
{
    struct features *features = user;
    struct entry *entry = NULL;
    int error = intern(features, word, &entry);
    if (error < 0) {
        return error;
    }
    if (features->in_title) {
        entry->in_title++;
    } else {
        entry->in_text++;
    }
    return 0;
}

static int take_field(struct features *features, const struct features_field *field)
{
    size_t name_bytes = strlen(field->name);
    size_t value_bytes = strlen(field->value);
    if (name_bytes >= FEATURES_FIELD_BYTES || value_bytes >= FEATURES_FIELD_BYTES - name_bytes) {
        return 0;
    }
    char term[FEATURES_FIELD_BYTES];
    memcpy(term, field->name, name_bytes);
    term[name_bytes] = '=';
    memcpy(term + name_bytes + 1, field->value, value_bytes);
    struct word word = {.term = term, .term_bytes = (uint32_t)(name_bytes + 1 + value_bytes)};
    struct entry *entry = NULL;
    int error = intern(features, &word, &entry);
    if (error == 0) {
        entry->is_field = true;
    }
    return error;
}

static void start_extraction(struct features *features, size_t most)
{
    features->count = 0;
    features->terms_bytes = 0;
    features->most = most;
    features->extraction++;
    if (features->extraction == 0) { /* once round: slots of old would look used */
        memset(features->slots, 0, features->slot_count * sizeof *features->slots);
        features->extraction = 1;
    }
}

static void finish_list(struct features *features)
{
    for (size_t i = 0; i < features->count; i++) {
        const struct entry *entry = &features->entries[i];
        struct feature *feature = &features->list[i];
        feature->term = features->terms + entry->term_at;
        feature->frequency =
            entry->is_field ? 1.0F
                            : (float)(entry->in_text + features->title_weight * entry->in_title);
        if (entry->is_field) {
            feature->surface = feature->term;
            feature->surface_bytes = feature->term_bytes;
        }
    }
}

int features_extract(struct features *features, const struct features_source *source, size_t most)
{
    start_extraction(features, most);
    features->in_title = true;
    int error = words_scan(features->words, source->title, source->title_bytes, source->language,
                           take_word, features);
    features->in_title = false;
    if (error == 0) {
        error = words_scan(features->words, source->text, source->text_bytes, source->language,
                           take_word, features);
    }
    for (size_t i = 0; i < source->field_count && error == 0; i++) {
        error = take_field(features, &source->fields[i]);
    }
    if (error < 0) {
        features->count = 0;
        return error;
    }
    finish_list(features);
    return 0;
}

size_t features_count(const struct features *features)
{
    return features->count;
}

const struct feature *features_list(const struct features *features)
{
    return features->list;
}

/* --- the workspace -----------------------------------------------------------------------------
 */

int features_new(const struct features_settings *settings, struct features **ret_features)
{
    struct features *features = calloc(1, sizeof *features);
    if (!features) {
        return -ENOMEM;
    }
    features->slots = calloc(FIRST_SLOTS, sizeof *features->slots);
    if (!features->slots || words_new(&settings->words, &features->words) < 0) {
        features_free(features);
        return -ENOMEM;
    }
    features->slot_count = FIRST_SLOTS;
    features->title_weight = settings->title_weight;
    features->key = settings->key;
    *ret_features = features;
    return 0;
}

void features_free(struct features *features)
{
    if (!features) {
        return;
    }
    words_free(features->words);
    free(features->slots);
    free(features->entries);
    free(features->list);
    free(features->terms);
    free(features);
}
