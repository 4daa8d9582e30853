/*
 * Chunks lie in an array of places, the free ones on a list, and are let go by a clock hand: a
 * chunk that was admitted since the hand came by gets another round (second chance).
 */
#include "daemon/learner/postings.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/grow.h"
#include "daemon/learner/postings_private.h"

enum {
    FIRST_CAPACITY = 4,   /* postings */
    ALLOCATION_BYTES = 16 /* what malloc takes for itself */
};

int postings_new(size_t lanes, struct postings **ret_postings)
{
    struct postings *made = calloc(1, sizeof *made);
    if (!made) {
        return -ENOMEM;
    }
    made->stride = 1 + lanes;
    *ret_postings = made;
    return 0;
}

void postings_free(struct postings *postings)
{
    if (!postings) {
        return;
    }
    for (size_t i = 0; i < postings->chunk_count; i++) {
        free(postings->chunks[i].numbers);
    }
    free(postings->chunks);
    free(postings->free_places);
    free(postings->changed);
    free(postings->sealed);
    free(postings->cuts);
    index_deinit(&postings->index);
    free(postings);
}

size_t postings_stride(const struct postings *postings)
{
    return postings->stride;
}

void postings_limit_tags(struct postings *postings, size_t tag_count)
{
    postings->tag_limit = tag_count;
}

uint64_t postings_bytes(const struct postings *postings)
{
    return sizeof *postings + index_bytes(&postings->index) +
           postings->chunk_capacity * sizeof *postings->chunks +
           postings->free_capacity * sizeof *postings->free_places +
           (postings->changed_capacity + postings->sealed_capacity) * sizeof *postings->changed +
           postings->cut_capacity * sizeof *postings->cuts + postings->number_bytes;
}

uint64_t postings_chunk_bytes(const struct postings *postings)
{
    size_t held = postings->chunk_count - postings->free_count;
    return sizeof *postings->chunks + (held > 0 ? postings->number_bytes / held : 0);
}

/* --- places -------------------------------------------------------------------------------------
 */

static uint64_t bytes_of(const struct postings *postings, size_t capacity)
{
    return capacity * postings->stride * sizeof(uint32_t) + ALLOCATION_BYTES;
}

/* Takes a place for a chunk with room for so many postings. */
static int take_place(struct postings *postings, uint32_t word, uint32_t number, size_t capacity,
                      uint32_t *ret_place)
{
    if (postings->free_count == 0 &&
        (GROW(&postings->chunks, &postings->chunk_capacity, postings->chunk_count + 1) < 0 ||
         GROW(&postings->free_places, &postings->free_capacity, postings->chunk_count + 1) < 0)) {
        return -ENOMEM;
    }
    uint32_t *numbers = calloc(capacity * postings->stride, sizeof *numbers);
    if (!numbers) {
        return -ENOMEM;
    }
    uint32_t place = postings->free_count > 0 ? postings->free_places[--postings->free_count]
                                              : (uint32_t)postings->chunk_count++;
    postings->chunks[place] = (struct chunk){.word = word,
                                             .number = number,
                                             .capacity = (uint16_t)capacity,
                                             .is_there = true,
                                             .is_used = true,
                                             .numbers = numbers};
    postings->number_bytes += bytes_of(postings, capacity);
    *ret_place = place;
    return 0;
}

void postings_free_place(struct postings *postings, uint32_t place)
{
    struct chunk *chunk = &postings->chunks[place];
    postings->number_bytes -= bytes_of(postings, chunk->capacity);
    postings->free_places[postings->free_count++] = place; /* there is room for every place */
    free(chunk->numbers);
    *chunk = (struct chunk){0};
}

struct chunk *postings_at(const struct postings *postings, uint32_t place)
{
    return &postings->chunks[place];
}

uint32_t postings_chunks(const struct postings *postings, uint32_t word,
                         const uint32_t **ret_places)
{
    const struct index_word *entry = index_find(&postings->index, word);
    *ret_places = entry ? index_places(entry) : NULL;
    return entry ? entry->chunk_count : 0;
}

size_t postings_count(const struct postings *postings, uint32_t word)
{
    const struct index_word *entry = index_find(&postings->index, word);
    if (!entry || entry->chunk_count == 0) {
        return 0;
    }
    uint32_t last = entry->chunk_count - 1; /* all others are full */
    return (size_t)last * POSTINGS_CHUNK + postings->chunks[index_places(entry)[last] - 1].count;
}

/* --- from the base ------------------------------------------------------------------------------
 */

bool postings_are(const struct postings *postings, struct base_bytes bytes)
{
    size_t posting_bytes = postings->stride * sizeof(uint32_t);
    bool fit = bytes.size > 0 && bytes.size % posting_bytes == 0 &&
               bytes.size <= POSTINGS_CHUNK * posting_bytes;
    for (size_t at = 0; fit && at < bytes.size; at += posting_bytes) {
        uint32_t tag = 0;
        memcpy(&tag, bytes.data + at, sizeof tag);
        fit = tag < postings->tag_limit;
    }
    return fit;
}

static int read_base(const struct postings *postings, const struct base *base, uint32_t word,
                     uint32_t number, struct base_bytes *ret_bytes)
{
    if (!base) {
        return -ENOENT;
    }
    int result = base->chunk(base->user, word, number, ret_bytes);
    return result == 0 && !postings_are(postings, *ret_bytes) ? -EIO : result;
}

/* --- reading ------------------------------------------------------------------------------------
 */

void postings_expect_word(const struct postings *postings, uint32_t word)
{
    index_expect(&postings->index, word);
}

void postings_expect_chunks(const struct postings *postings, uint32_t word)
{
    const struct index_word *entry = index_find(&postings->index, word);
    if (!entry) {
        return;
    }
    if (entry->capacity > 0) {
        __builtin_prefetch(entry->places.many);
    } else if (entry->places.one != 0) {
        __builtin_prefetch(&postings->chunks[entry->places.one - 1]);
    }
}

void postings_walk_begin(const struct postings *postings, const struct base *base, uint32_t word,
                         struct postings_walk *ret_walk)
{
    const struct index_word *entry = index_find(&postings->index, word);
    ret_walk->postings = postings;
    ret_walk->base = base;
    ret_walk->word = word;
    ret_walk->number = 0;
    ret_walk->chunk_count = entry ? entry->chunk_count : UINT32_MAX;
    ret_walk->known = entry ? index_places(entry) : NULL;
}

int postings_walk_next(struct postings_walk *walk, const uint32_t **ret_numbers, size_t *ret_count)
{
    uint32_t number = walk->number;
    if (number == walk->chunk_count) {
        return -ENOENT;
    }
    walk->number++;
    uint32_t place = walk->known ? walk->known[number] : 0;
    if (place != 0) {
        const struct chunk *chunk = &walk->postings->chunks[place - 1];
        *ret_numbers = chunk->numbers;
        *ret_count = chunk->count;
        return 0;
    }
    struct base_bytes bytes;
    int result = read_base(walk->postings, walk->base, walk->word, number, &bytes);
    if (result == -ENOENT && walk->known) {
        return -EIO; /* the index knows of it */
    }
    if (result == 0) {
        memcpy(walk->buffer, bytes.data, bytes.size); /* aligned */
        *ret_numbers = walk->buffer;
        *ret_count = bytes.size / (walk->postings->stride * sizeof(uint32_t));
    }
    return result;
}

/* --- changing -----------------------------------------------------------------------------------
 */

/* Reads one chunk into memory; -ENOENT where it is not stored. */
static int admit_chunk(struct postings *postings, const struct base *base, uint32_t word,
                       uint32_t number)
{
    struct base_bytes bytes;
    int result = read_base(postings, base, word, number, &bytes);
    if (result < 0) {
        return result;
    }
    size_t count = bytes.size / (postings->stride * sizeof(uint32_t));
    struct index_word *entry = NULL;
    uint32_t place = 0;
    if (index_add(&postings->index, word, &entry) < 0 ||
        (number == entry->chunk_count && index_add_chunk(&postings->index, entry) < 0)) {
        return -ENOMEM;
    }
    if (take_place(postings, word, number, count, &place) < 0) {
        return -ENOMEM;
    }
    memcpy(postings->chunks[place].numbers, bytes.data, bytes.size);
    postings->chunks[place].count = (uint16_t)count;
    index_set_place(entry, number, place + 1);
    return 0;
}

int postings_admit(struct postings *postings, const struct base *base, uint32_t word)
{
    const struct index_word *entry = index_find(&postings->index, word);
    if (!entry) {
        int result = 0;
        for (uint32_t number = 0; result == 0; number++) {
            result = admit_chunk(postings, base, word, number);
        }
        if (result != -ENOENT) {
            (void)postings_drop(postings, word); /* a part would pass for the whole */
        }
        return result == -ENOENT ? 0 : result;
    }
    for (uint32_t number = 0; number < entry->chunk_count; number++) {
        uint32_t place = index_places(entry)[number];
        if (place != 0) {
            postings->chunks[place - 1].is_used = true;
            continue;
        }
        int result = admit_chunk(postings, base, word, number);
        if (result < 0) {
            return result == -ENOENT ? -EIO : result;
        }
    }
    return 0;
}

int postings_touch(struct postings *postings, uint32_t place)
{
    struct chunk *chunk = &postings->chunks[place];
    if (chunk->is_changed) {
        return 0;
    }
    if (GROW(&postings->changed, &postings->changed_capacity, postings->changed_count + 1) < 0) {
        return -ENOMEM;
    }
    postings->changed[postings->changed_count++] = place;
    chunk->is_changed = true;
    return 0;
}

static int enlarge_chunk(struct postings *postings, struct chunk *chunk)
{
    size_t capacity = chunk->capacity + chunk->capacity / 2U + FIRST_CAPACITY;
    capacity = capacity < POSTINGS_CHUNK ? capacity : POSTINGS_CHUNK;
    uint32_t *numbers =
        realloc(chunk->numbers, capacity * postings->stride * sizeof *chunk->numbers);
    if (!numbers) {
        return -ENOMEM;
    }
    postings->number_bytes += bytes_of(postings, capacity) - bytes_of(postings, chunk->capacity);
    chunk->numbers = numbers;
    chunk->capacity = (uint16_t)capacity;
    return 0;
}

/* The last chunk of a word, if it has room for one more. */
static struct chunk *last_with_room(const struct postings *postings, const struct index_word *entry)
{
    if (!entry || entry->chunk_count == 0) {
        return NULL;
    }
    struct chunk *last = &postings->chunks[index_places(entry)[entry->chunk_count - 1] - 1];
    return last->count < POSTINGS_CHUNK ? last : NULL;
}

static int add_chunk(struct postings *postings, uint32_t word, struct chunk **ret_chunk)
{
    struct index_word *entry = NULL;
    uint32_t place = 0;
    if (index_add(&postings->index, word, &entry) < 0 ||
        take_place(postings, word, entry->chunk_count, FIRST_CAPACITY, &place) < 0) {
        return -ENOMEM;
    }
    if (index_add_chunk(&postings->index, entry) < 0) {
        postings_free_place(postings, place);
        return -ENOMEM;
    }
    index_set_place(entry, entry->chunk_count - 1, place + 1);
    *ret_chunk = &postings->chunks[place];
    return 0;
}

int postings_append(struct postings *postings, uint32_t word, uint32_t tag, uint32_t *ret_place,
                    uint32_t *ret_at)
{
    struct chunk *chunk = last_with_room(postings, index_find(&postings->index, word));
    if (!chunk && add_chunk(postings, word, &chunk) < 0) {
        return -ENOMEM;
    }
    if (chunk->count == chunk->capacity && enlarge_chunk(postings, chunk) < 0) {
        return -ENOMEM;
    }
    uint32_t place = (uint32_t)(chunk - postings->chunks);
    if (postings_touch(postings, place) < 0) {
        return -ENOMEM;
    }
    uint32_t *posting = chunk->numbers + chunk->count * postings->stride;
    memset(posting, 0, postings->stride * sizeof *posting);
    posting[0] = tag;
    *ret_place = place;
    *ret_at = chunk->count++;
    return 0;
}

/* Lets the chunks from a number on go, and notes that the store shall forget them. */
static int cut_chunks(struct postings *postings, struct index_word *entry, uint32_t from)
{
    if (from == entry->chunk_count) {
        return 0;
    }
    if (GROW(&postings->cuts, &postings->cut_capacity, postings->cut_count + 1) < 0) {
        return -ENOMEM;
    }
    postings->cuts[postings->cut_count++] =
        (struct postings_cut){.word = entry->key - 1, .from = from, .until = entry->chunk_count};
    for (uint32_t number = from; number < entry->chunk_count; number++) {
        uint32_t place = index_places(entry)[number] - 1;
        index_set_place(entry, number, 0);
        postings_free_place(postings, place);
    }
    index_cut_chunks(entry, from);
    return 0;
}

int postings_replace(struct postings *postings, uint32_t word, const uint32_t *numbers,
                     size_t count)
{
    struct index_word *entry = index_find(&postings->index, word);
    uint32_t chunks = (uint32_t)((count + POSTINGS_CHUNK - 1) / POSTINGS_CHUNK);
    if (!entry) {
        return 0; /* an admitted word without postings: none can take their place */
    }
    if (cut_chunks(postings, entry, chunks) < 0) {
        return -ENOMEM;
    }
    for (uint32_t number = 0; number < chunks; number++) {
        uint32_t place = index_places(entry)[number] - 1;
        struct chunk *chunk = &postings->chunks[place];
        size_t first = (size_t)number * POSTINGS_CHUNK;
        size_t left = count - first;
        if (postings_touch(postings, place) < 0) {
            return -ENOMEM;
        }
        chunk->count = (uint16_t)(left < POSTINGS_CHUNK ? left : POSTINGS_CHUNK);
        memcpy(chunk->numbers, numbers + first * postings->stride,
               chunk->count * postings->stride * sizeof *numbers);
    }
    return 0; /* a word without chunks stays known: the base still has some */
}

uint64_t postings_drop(struct postings *postings, uint32_t word)
{
    const struct index_word *entry = index_find(&postings->index, word);
    uint64_t dropped = 0;
    for (uint32_t number = 0; entry && number < entry->chunk_count; number++) {
        uint32_t place = index_places(entry)[number];
        if (place != 0) {
            dropped += postings->chunks[place - 1].count;
            postings_free_place(postings, place - 1);
        }
    }
    index_remove(&postings->index, word);
    return dropped;
}
