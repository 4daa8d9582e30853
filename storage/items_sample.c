/*
 * Seqs are drawn until enough of them are unchecked items as they are now. Where most seqs are not
 * (many revisions, or nearly all items checked), all items are walked instead, and each has the
 * same chance to be kept (reservoir sampling, Vitter 1985, algorithm R).
 */
#include "storage/items_sample.h"

#include "storage/items_private.h"
#include "storage/store_private.h"

enum {
    TRIES_AN_ITEM = 64
};

/* SplitMix64 (Steele, Lea & Flood 2014; constants from memory). */
static uint64_t next_random(uint64_t *state)
{
    uint64_t mixed = *state += 0x9E3779B97F4A7C15U;
    mixed = (mixed ^ (mixed >> 30U)) * 0xBF58476D1CE4E5B9U;
    mixed = (mixed ^ (mixed >> 27U)) * 0x94D049BB133111EBU;
    return mixed ^ (mixed >> 31U);
}

/* A number below `limit`, each with the same chance. */
static uint64_t random_below(uint64_t *state, uint64_t limit)
{
    uint64_t most = UINT64_MAX - UINT64_MAX % limit;
    uint64_t drawn = next_random(state);
    while (drawn >= most) {
        drawn = next_random(state);
    }
    return drawn % limit;
}

static bool is_unchecked(const struct item_record *record)
{
    return !item_is_withdrawn(record) && !record->check.is_there;
}

/* --- drawing seqs -------------------------------------------------------------------------------
 */

static bool is_drawn(const uint64_t *seqs, size_t count, uint64_t seq)
{
    for (size_t i = 0; i < count; i++) {
        if (seqs[i] == seq) {
            return true;
        }
    }
    return false;
}

/* Whether the record of a seq is an unchecked item as it is now. */
static int look_at(struct store_view *view, uint64_t seq, struct item_buffer *buffer,
                   bool *ret_fits, struct store_error *error)
{
    struct item_record record = {0};
    struct id_entry entry = {0};
    int result = items_read(view, seq, buffer, &record, error);
    *ret_fits = false;
    if (result == STORE_NOT_FOUND) {
        return STORE_OK; /* erased */
    }
    if (result == STORE_OK) {
        result = items_entry(view, record.id, &entry, error);
    }
    *ret_fits = result == STORE_OK && entry.seq == seq && is_unchecked(&record);
    return result;
}

static int draw(struct store_view *view, uint64_t *random, size_t most, struct item_buffer *buffer,
                uint64_t *seqs, size_t *ret_count, struct store_error *error)
{
    size_t count = 0;
    for (size_t tries = 0; count < most && tries < most * TRIES_AN_ITEM; tries++) {
        uint64_t seq = 1 + random_below(random, view->totals.seq);
        bool fits = false;
        int result =
            is_drawn(seqs, count, seq) ? STORE_OK : look_at(view, seq, buffer, &fits, error);
        if (result != STORE_OK) {
            return result;
        }
        if (fits) {
            seqs[count++] = seq;
        }
    }
    *ret_count = count;
    return STORE_OK;
}

/* --- walking ------------------------------------------------------------------------------------
 */

struct reservoir {
    uint64_t *random;
    size_t most;
    uint64_t *seqs;
    size_t count;
    uint64_t met;
};

static int meet(void *user, const struct item_record *record)
{
    struct reservoir *reservoir = user;
    if (!is_unchecked(record)) {
        return STORE_OK;
    }
    reservoir->met++;
    if (reservoir->count < reservoir->most) {
        reservoir->seqs[reservoir->count++] = record->seq;
        return STORE_OK;
    }
    uint64_t place = random_below(reservoir->random, reservoir->met);
    if (place < reservoir->most) {
        reservoir->seqs[place] = record->seq;
    }
    return STORE_OK;
}

/* The reservoir is a fair set, but in no fair order. */
static void shuffle(uint64_t *random, uint64_t *seqs, size_t count)
{
    for (size_t i = count; i > 1; i--) {
        size_t j = (size_t)random_below(random, i);
        uint64_t kept = seqs[i - 1];
        seqs[i - 1] = seqs[j];
        seqs[j] = kept;
    }
}

int items_sample(struct store_view *view, uint64_t seed, size_t most, struct item_buffer *buffer,
                 uint64_t *ret_seqs, size_t *ret_count, struct store_error *error)
{
    uint64_t random = seed;
    *ret_count = 0;
    if (view->totals.items == 0 || most == 0) {
        return STORE_OK;
    }
    int result = draw(view, &random, most, buffer, ret_seqs, ret_count, error);
    if (result != STORE_OK || *ret_count == most) {
        return result;
    }
    struct reservoir reservoir = {.random = &random, .most = most, .seqs = ret_seqs};
    uint64_t next = 0;
    result = items_changed(view, 0, SIZE_MAX, meet, &reservoir, buffer, &next, error);
    if (result == STORE_OK) {
        shuffle(&random, ret_seqs, reservoir.count);
        *ret_count = reservoir.count;
    }
    return result;
}
