/*
 * postings: which tags a word speaks for: (tag, cell) pairs, in chunks of a size that stays in a
 * leaf page of the store, and one coded form in memory and there. A posting has a cell for each
 * lane: learners that share the list of tags but not the weights.
 *
 * Memory holds what has changed since it was stored, and what was wanted lately; other chunks are
 * read from the base. What is in memory changes only the time that something takes, never what
 * comes out. Not locked: many threads may walk while none changes.
 *
 * A posting is a tag, followed by a cell for each lane: 4 bytes each, in the machine's own order.
 */
#ifndef UNDERTAG_POSTINGS_H
#define UNDERTAG_POSTINGS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "daemon/base.h"

enum {
    POSTINGS_CHUNK = 160, /* postings to a chunk */
    POSTINGS_TRIM = 2048,
    POSTINGS_MOST_LANES = 2,
    POSTINGS_MOST_NUMBERS = POSTINGS_CHUNK * (1 + POSTINGS_MOST_LANES)
};

/* Read freely; cells may be changed in place after postings_touch. */
struct chunk {
    uint32_t word;
    uint32_t number; /* of the word's, from 0 */
    uint16_t count;
    uint16_t capacity;
    bool is_there; /* otherwise the place is free */
    bool is_changed;
    bool is_sealed;    /* on its way to the store; may have changed again since */
    bool is_used;      /* since the clock hand passed */
    uint32_t *numbers; /* postings, one after the other */
};

struct postings;

int postings_new(size_t lanes, struct postings **ret_postings) __attribute__((warn_unused_result));
void postings_free(struct postings *postings);

/* Numbers to a posting: 1 + lanes. */
size_t postings_stride(const struct postings *postings);

/* What is stored and names a tag from here on is damaged. */
void postings_limit_tags(struct postings *postings, size_t tag_count);

/* Bytes held in memory. */
uint64_t postings_bytes(const struct postings *postings);

/* Bytes of a chunk in memory, on average. */
uint64_t postings_chunk_bytes(const struct postings *postings);

/* --- reading --- */

/* Has the processor fetch where a word is looked up; then, a while later, where its chunks are.
 * They change nothing. */
void postings_expect_word(const struct postings *postings, uint32_t word);
void postings_expect_chunks(const struct postings *postings, uint32_t word);

/* Walks a word's chunks, whether they are in memory or not. */
struct postings_walk {
    const struct postings *postings;
    const struct base *base;
    uint32_t word;
    uint32_t number;       /* of the chunk that comes next */
    uint32_t chunk_count;  /* where the word is known in memory */
    const uint32_t *known; /* by chunk: 1 + its place, 0 where it is not in memory; or NULL */
    uint32_t buffer[POSTINGS_MOST_NUMBERS];
};

void postings_walk_begin(const struct postings *postings, const struct base *base, uint32_t word,
                         struct postings_walk *ret_walk);

/* The next chunk's postings, valid until the next step; 0, -ENOENT behind the last one, -EIO where
 * what is stored cannot be read or does not fit, or -ENOMEM. */
int postings_walk_next(struct postings_walk *walk, const uint32_t **ret_numbers, size_t *ret_count);

/* Whether these bytes can be a stored chunk of these postings. */
bool postings_are(const struct postings *postings, struct base_bytes bytes);

/* --- changing --- */

/* Brings all of a word's chunks into memory. Returns 0, -EIO or -ENOMEM. */
int postings_admit(struct postings *postings, const struct base *base, uint32_t word)
    __attribute__((warn_unused_result));

/* The chunks of an admitted word: how many there are, and by chunk 1 + its place. Valid until
 * something is admitted, appended, dropped or trimmed. */
uint32_t postings_chunks(const struct postings *postings, uint32_t word,
                         const uint32_t **ret_places);

/* How many postings an admitted word has. */
size_t postings_count(const struct postings *postings, uint32_t word);

/* The chunk at a place; valid until something is admitted, appended or trimmed. */
struct chunk *postings_at(const struct postings *postings, uint32_t place);

/* Marks a chunk as changed. Returns 0 or -ENOMEM. */
int postings_touch(struct postings *postings, uint32_t place) __attribute__((warn_unused_result));

/* Appends a posting without a weight to an admitted word; its chunk's place, and its own in the
 * chunk. Returns 0 or -ENOMEM. */
int postings_append(struct postings *postings, uint32_t word, uint32_t tag, uint32_t *ret_place,
                    uint32_t *ret_at) __attribute__((warn_unused_result));

/* Puts other postings in the place of an admitted word's, at most as many, into as few chunks as
 * they need. Returns 0 or -ENOMEM. */
int postings_replace(struct postings *postings, uint32_t word, const uint32_t *numbers,
                     size_t count) __attribute__((warn_unused_result));

/* Drops an admitted word's chunks, changed or not; how many postings they had. */
uint64_t postings_drop(struct postings *postings, uint32_t word);

/* --- storing --- */

/* Chunks that have changed and are not stored, sealed ones too, by rising word and number. The
 * caller frees the list. Returns 0 or -ENOMEM. */
int postings_changed(const struct postings *postings, uint32_t **ret_places, size_t *ret_count)
    __attribute__((warn_unused_result));
size_t postings_changed_count(const struct postings *postings);

/* The chunks of a word that postings_replace has left over, from the first one on. */
struct postings_cut {
    uint32_t word;
    uint32_t from;
    uint32_t until; /* the number behind the last one */
};

/* What was cut off and is not stored; it goes before what has changed. */
const struct postings_cut *postings_cuts(const struct postings *postings, size_t *ret_count);

/*
 * What has changed is on its way to the store, as it is now: it stays in memory, apart from what
 * changes from here on. What was sealed before and did not arrive is sealed with it. Returns 0, or
 * -ENOMEM with nothing changed.
 */
int postings_seal(struct postings *postings) __attribute__((warn_unused_result));

/* What was sealed is stored. */
void postings_stored(struct postings *postings);

/* All is stored, sealed or not. */
void postings_clean(struct postings *postings);

/* Lets go of chunks that are stored and were not admitted lately, until there are at most so many
 * bytes, or it has looked at POSTINGS_TRIM places: the next call goes on, so that none takes long.
 */
void postings_trim(struct postings *postings, uint64_t bytes);

#endif
