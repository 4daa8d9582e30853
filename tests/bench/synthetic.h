/*
 * synthetic: invented items without end, each a function of the seed and its number alone.
 *
 * Words and tags are drawn by Zipf's law with exponent 1, P(rank) ~ 1/rank, by the inverse of its
 * distribution: rank = (n + 1)^u for a uniform u, cut to a whole number, which gives rank k the
 * share ln((k + 1)/k)/ln(n + 1). Each tag has words of its own, drawn once, and lends some of them
 * to its items: so there is something to learn. With `walk` every item also takes the next two tags
 * in a fixed order, so that all of them come to be used; without, the vocabulary grows as Zipf's
 * law has it. With `flat` the words that speak for nothing are drawn from the vocabulary alike, not
 * by Zipf's law: then few items share a word, and nearly all of their weights are new.
 */
#ifndef UNDERTAG_BENCH_SYNTHETIC_H
#define UNDERTAG_BENCH_SYNTHETIC_H

#include <math.h>
#include <stdbool.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>

enum {
    SYNTHETIC_ZIPF_TAGS = 4,
    SYNTHETIC_WALK_TAGS = 2,
    SYNTHETIC_OWN_WORDS = 6,  /* of a tag */
    SYNTHETIC_LENT_WORDS = 3, /* of those, to an item that has the tag */
    SYNTHETIC_WORDS = 12,     /* of an item, that speak for nothing, unless it is said otherwise */
    SYNTHETIC_BYTES = 2048,   /* an item takes less, those words left out */
    SYNTHETIC_WORD_BYTES = 9  /* a word takes at most, its space included */
};

struct synthetic {
    uint64_t seed;
    uint32_t words;
    uint32_t tags;
    bool walk;
    bool flat;
    uint32_t empty_words; /* of an item, that speak for nothing; 0: SYNTHETIC_WORDS */
};

/* The next of a sequence of 64 random bits (splitmix64: Steele, Lea, Flood, OOPSLA 2014). */
static inline uint64_t synthetic_bits(uint64_t *state)
{
    *state += 0x9e3779b97f4a7c15U;
    uint64_t bits = *state;
    bits = (bits ^ (bits >> 30)) * 0xbf58476d1ce4e5b9U;
    bits = (bits ^ (bits >> 27)) * 0x94d049bb133111ebU;
    return bits ^ (bits >> 31);
}

/* A rank from 0 below n. */
static inline uint32_t synthetic_zipf(uint64_t *state, uint32_t n)
{
    double uniform = (double)(synthetic_bits(state) >> 11) * 0x1p-53;
    uint32_t rank = (uint32_t)pow((double)n + 1.0, uniform);
    return rank > n ? n - 1 : rank - 1;
}

/* One of a tag's own words: any of the vocabulary, alike. */
static inline uint32_t synthetic_own_word(const struct synthetic *synthetic, uint32_t tag,
                                          uint32_t which)
{
    uint64_t state = synthetic->seed ^ (((uint64_t)tag + 1) << 24) ^ which;
    return (uint32_t)(synthetic_bits(&state) % synthetic->words);
}

/* A word that speaks for nothing. */
static inline uint32_t synthetic_empty_word(const struct synthetic *synthetic, uint64_t *state)
{
    return synthetic->flat ? (uint32_t)(synthetic_bits(state) % synthetic->words)
                           : synthetic_zipf(state, synthetic->words);
}

struct synthetic_text {
    char *bytes;
    size_t length;
};

/* Words are letters only: the number in base 26, after a letter. */
static inline void synthetic_put_word(struct synthetic_text *text, uint32_t word)
{
    text->bytes[text->length++] = 'w';
    do {
        text->bytes[text->length++] = (char)('a' + word % 26);
        word /= 26;
    } while (word > 0);
    text->bytes[text->length++] = ' ';
}

static inline size_t synthetic_tags(const struct synthetic *synthetic, uint64_t item,
                                    uint64_t *state, uint32_t *ret_tags)
{
    size_t count = 0;
    for (; count < SYNTHETIC_ZIPF_TAGS; count++) {
        ret_tags[count] = synthetic_zipf(state, synthetic->tags);
    }
    for (uint64_t i = 0; synthetic->walk && i < SYNTHETIC_WALK_TAGS; i++) {
        ret_tags[count++] = (uint32_t)((item * SYNTHETIC_WALK_TAGS + i) % synthetic->tags);
    }
    return count;
}

/* The params of item.file as text, which the caller frees; NULL without memory. */
static inline char *synthetic_item(const struct synthetic *synthetic, uint64_t item)
{
    uint32_t tags[SYNTHETIC_ZIPF_TAGS + SYNTHETIC_WALK_TAGS];
    uint64_t state = synthetic->seed + item * 0x2545f4914f6cdd1dU;
    uint32_t empty_words = synthetic->empty_words ? synthetic->empty_words : SYNTHETIC_WORDS;
    size_t capacity = SYNTHETIC_BYTES + (size_t)empty_words * SYNTHETIC_WORD_BYTES;
    struct synthetic_text text = {.bytes = malloc(capacity)};
    if (!text.bytes) {
        return NULL;
    }
    size_t tag_count = synthetic_tags(synthetic, item, &state, tags);
    text.length = (size_t)snprintf(text.bytes, capacity, "{\"id\":\"s%llu\",\"text\":\"",
                                   (unsigned long long)item);
    for (uint32_t i = 0; i < empty_words; i++) {
        synthetic_put_word(&text, synthetic_empty_word(synthetic, &state));
    }
    for (size_t i = 0; i < tag_count; i++) {
        for (int j = 0; j < SYNTHETIC_LENT_WORDS; j++) {
            uint32_t which = (uint32_t)(synthetic_bits(&state) % SYNTHETIC_OWN_WORDS);
            synthetic_put_word(&text, synthetic_own_word(synthetic, tags[i], which));
        }
    }
    for (size_t i = 0; i < tag_count; i++) {
        text.length += (size_t)snprintf(text.bytes + text.length, capacity - text.length,
                                        "%s\"t%u\"", i == 0 ? "\",\"tags\":[" : ",", tags[i]);
    }
    (void)snprintf(text.bytes + text.length, capacity - text.length, "]}"); /* it fits */
    return text.bytes;
}

#endif
