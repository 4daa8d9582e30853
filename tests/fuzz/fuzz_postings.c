/*
 * Postings over a base that may hold anything: what fits is walked as it is, what does not is told,
 * and what is in memory makes no difference.
 *
 * Input: lanes, how many tags there are, the chunks of four words (a length each, then bytes), then
 * steps on them: walk, admit, append, replace, drop, store, trim.
 */
#include "daemon/learner/postings.h"

#include <errno.h>

#include "tests/fuzz/fuzz.h"

enum {
    WORDS = 4,
    CHUNKS = 4, /* of a word, at most, in the base */
    STEPS_MOST = 64,
    CHUNK_BYTES_MOST = 2048,
    NUMBERS_MOST = 16 * POSTINGS_MOST_NUMBERS
};

struct stored {
    unsigned char *bytes; /* NULL: there is no such chunk */
    size_t size;
};

struct world {
    struct base base;
    struct postings *postings;
    size_t stride;
    uint32_t tags;
    struct stored chunks[WORDS][CHUNKS + STEPS_MOST];
    bool is_broken[WORDS]; /* what the base has does not fit */
};

/* --- the base --- */

static int read_chunk(void *user, uint32_t word, uint32_t number, struct base_bytes *ret_bytes)
{
    struct world *world = user;
    const struct stored *chunk = number < CHUNKS + STEPS_MOST ? &world->chunks[word][number] : NULL;
    if (!chunk || !chunk->bytes) {
        return -ENOENT;
    }
    *ret_bytes = (struct base_bytes){.data = chunk->bytes, .size = chunk->size};
    return 0;
}

/* Whether a chunk is postings, by the contract: tags that there are, and no part of one. */
static bool is_whole(const struct world *world, const struct stored *chunk)
{
    size_t posting_bytes = world->stride * sizeof(uint32_t);
    if (chunk->size == 0 || chunk->size % posting_bytes != 0 ||
        chunk->size / posting_bytes > POSTINGS_CHUNK) {
        return false;
    }
    for (size_t at = 0; at < chunk->size; at += posting_bytes) {
        uint32_t tag = 0;
        memcpy(&tag, chunk->bytes + at, sizeof tag);
        if (tag >= world->tags) {
            return false;
        }
    }
    return true;
}

/* All chunks but the last are full where the learner wrote them; others are damage that no checksum
 * tells, and is not looked for (see postings_count). */
static bool is_full(const struct world *world, const struct stored *chunk)
{
    return chunk->size == POSTINGS_CHUNK * world->stride * sizeof(uint32_t);
}

static void take_chunks(struct world *world, struct fuzz_input *input)
{
    for (size_t word = 0; word < WORDS; word++) {
        size_t count = fuzz_byte(input) % (CHUNKS + 1U);
        for (size_t i = 0; i < count; i++) {
            size_t size = fuzz_byte(input) | (size_t)fuzz_byte(input) << 8U;
            bool repeats = size & 0x8000U; /* a full chunk out of a few bytes */
            struct fuzz_input part = fuzz_part(input, size % CHUNK_BYTES_MOST);
            struct stored *chunk = &world->chunks[word][i];
            size_t full = POSTINGS_CHUNK * world->stride * sizeof(uint32_t);
            chunk->size = repeats && part.size > 0 ? full : part.size;
            chunk->bytes = fuzz_room(chunk->size);
            for (size_t at = 0; at < chunk->size; at++) {
                chunk->bytes[at] = part.data[at % part.size];
            }
            world->is_broken[word] = world->is_broken[word] || !is_whole(world, chunk) ||
                                     (i + 1 < count && !is_full(world, chunk));
        }
    }
}

/* --- steps --- */

/* All of a word's numbers; false where the walk ends in damage. */
static bool walk(struct world *world, uint32_t word, uint32_t *numbers, size_t *ret_count)
{
    struct postings_walk *at = fuzz_room(sizeof *at);
    const uint32_t *found = NULL;
    size_t count = 0;
    size_t used = 0;
    int code = 0;
    postings_walk_begin(world->postings, &world->base, word, at);
    while ((code = postings_walk_next(at, &found, &count)) == 0) {
        FUZZ_CHECK(count > 0 && count <= POSTINGS_CHUNK);
        FUZZ_CHECK(used + count * world->stride <= NUMBERS_MOST);
        memcpy(numbers + used, found, count * world->stride * sizeof *found);
        for (size_t i = 0; i < count; i++) {
            FUZZ_CHECK(found[i * world->stride] < world->tags);
        }
        used += count * world->stride;
    }
    free(at);
    FUZZ_CHECK(code == -ENOENT || code == -EIO);
    FUZZ_CHECK(code == -ENOENT || world->is_broken[word]);
    *ret_count = used;
    return code == -ENOENT;
}

/* What is done to no posting changes none. */
static void check_unchanged(struct world *world, uint32_t word,
                            void (*act)(struct world *, uint32_t))
{
    static uint32_t before[NUMBERS_MOST];
    static uint32_t after[NUMBERS_MOST];
    size_t counts[2] = {0};
    bool was_whole = walk(world, word, before, &counts[0]);
    act(world, word);
    bool is_still = walk(world, word, after, &counts[1]);
    FUZZ_CHECK(was_whole == is_still);
    FUZZ_CHECK(!was_whole ||
               (counts[0] == counts[1] && memcmp(before, after, counts[0] * sizeof *before) == 0));
}

static void admit(struct world *world, uint32_t word)
{
    int code = postings_admit(world->postings, &world->base, word);
    FUZZ_CHECK(code == 0 || code == -EIO);
    FUZZ_CHECK(code == 0 || world->is_broken[word]);
}

static void trim(struct world *world, uint32_t word)
{
    (void)word;
    for (int i = 0; i < 3; i++) {
        postings_trim(world->postings, 0);
    }
}

static void forget(struct world *world, uint32_t word, uint32_t from)
{
    for (uint32_t number = from; number < CHUNKS + STEPS_MOST; number++) {
        free(world->chunks[word][number].bytes);
        world->chunks[word][number] = (struct stored){0};
    }
}

/* Everything that has changed goes into the base. */
static void store(struct world *world, uint32_t unused)
{
    uint32_t *places = NULL;
    size_t count = 0;
    (void)unused;
    const struct postings_cut *cuts = postings_cuts(world->postings, &count);
    for (size_t i = 0; i < count; i++) {
        for (uint32_t number = cuts[i].from; number < cuts[i].until; number++) {
            struct stored *chunk = &world->chunks[cuts[i].word][number];
            free(chunk->bytes);
            *chunk = (struct stored){0};
        }
    }
    FUZZ_CHECK(postings_changed(world->postings, &places, &count) == 0);
    for (size_t i = 0; i < count; i++) {
        const struct chunk *changed = postings_at(world->postings, places[i]);
        FUZZ_CHECK(changed->number < CHUNKS + STEPS_MOST);
        struct stored *chunk = &world->chunks[changed->word][changed->number];
        free(chunk->bytes);
        chunk->size = changed->count * world->stride * sizeof(uint32_t);
        chunk->bytes = fuzz_room(chunk->size);
        memcpy(chunk->bytes, changed->numbers, chunk->size);
    }
    free(places);
    postings_clean(world->postings);
}

static void append(struct world *world, uint32_t word, uint32_t tag)
{
    uint32_t place = 0;
    uint32_t at = 0;
    size_t before = postings_count(world->postings, word);
    FUZZ_CHECK(postings_append(world->postings, word, tag, &place, &at) == 0);
    FUZZ_CHECK(postings_count(world->postings, word) == before + 1);
    const struct chunk *chunk = postings_at(world->postings, place);
    FUZZ_CHECK(at + 1U == chunk->count && chunk->numbers[at * world->stride] == tag);
}

/* Keeps the first `keep` of a word's postings. */
static void cut(struct world *world, uint32_t word, size_t keep)
{
    static uint32_t numbers[NUMBERS_MOST];
    size_t used = 0;
    FUZZ_CHECK(walk(world, word, numbers, &used));
    size_t count = used / world->stride;
    FUZZ_CHECK(count == postings_count(world->postings, word));
    count = keep < count ? keep : count;
    FUZZ_CHECK(postings_replace(world->postings, word, numbers, count) == 0);
    FUZZ_CHECK(postings_count(world->postings, word) == count);
}

/* The word is gone, and the store forgets it in the same breath. */
static void drop(struct world *world, uint32_t word)
{
    store(world, word);
    (void)postings_drop(world->postings, word);
    forget(world, word, 0);
    world->is_broken[word] = false;
}

static void step(struct world *world, struct fuzz_input *input)
{
    uint8_t what = fuzz_byte(input);
    uint32_t word = what % WORDS;
    uint8_t detail = fuzz_byte(input);
    switch (what / WORDS % 6U) {
    case 0:
        check_unchanged(world, word, admit);
        return;
    case 1:
        check_unchanged(world, word, trim);
        return;
    case 2:
        check_unchanged(world, word, store);
        return;
    case 3:
        drop(world, word);
        return;
    default:
        break;
    }
    if (postings_admit(world->postings, &world->base, word) != 0) {
        FUZZ_CHECK(world->is_broken[word]);
    } else if (world->is_broken[word]) {
        return; /* chunks that are not full: the learner writes none */
    } else if (what / WORDS % 6U == 4) {
        append(world, word, detail % world->tags);
    } else {
        cut(world, word, detail * 2U);
    }
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    struct fuzz_input input = {.data = data, .size = size};
    struct world *world = calloc(1, sizeof *world);
    FUZZ_CHECK(world);
    world->base = (struct base){.user = world, .chunk = read_chunk};
    size_t lanes = 1 + fuzz_byte(&input) % POSTINGS_MOST_LANES;
    world->stride = 1 + lanes;
    world->tags = 1U + (fuzz_byte(&input) | (uint32_t)fuzz_byte(&input) << 8U);
    FUZZ_CHECK(postings_new(lanes, &world->postings) == 0);
    postings_limit_tags(world->postings, world->tags);
    take_chunks(world, &input);
    for (int i = 0; i < STEPS_MOST && input.size > 0; i++) {
        step(world, &input);
    }
    uint32_t *numbers = fuzz_room(NUMBERS_MOST * sizeof *numbers);
    for (uint32_t word = 0; word < WORDS; word++) {
        size_t count = 0;
        (void)walk(world, word, numbers, &count);
        forget(world, word, 0);
    }
    free(numbers);
    postings_free(world->postings);
    free(world);
    return 0;
}

/* Four words of four full chunks, and many steps; then the same with a tag that is not there. */
uint8_t *fuzz_made(size_t number, size_t *ret_size)
{
    enum {
        WORD_BYTES = 1 + CHUNKS * (2 + 12),
        STEP_BYTES = 2 * STEPS_MOST
    };
    if (number > 1) {
        return NULL;
    }
    size_t size = 3 + WORDS * WORD_BYTES + STEP_BYTES;
    uint8_t *made = fuzz_room(size);
    memset(made, 0, size);
    made[0] = 1; /* two lanes: 12 bytes a posting */
    made[1] = 9;
    uint8_t *at = made + 3;
    for (size_t word = 0; word < WORDS; word++) {
        *at++ = CHUNKS;
        for (size_t i = 0; i < CHUNKS; i++, at += 14) {
            const uint8_t head[] = {12, 0x80, (uint8_t)(word == 3 && number == 1 ? 77 : word)};
            memcpy(at, head, sizeof head);
        }
    }
    for (size_t i = 0; i < STEP_BYTES; i++) {
        at[i] = (uint8_t)(i * 37);
    }
    *ret_size = size;
    return made;
}
