/*
 * fuzz: what the targets share. A target is one file with LLVMFuzzerTestOneInput, which does
 * something with any bytes and ends the program where a property does not hold; and fuzz_made, the
 * inputs that are too large to be kept as files. libFuzzer drives it in `make fuzz`, replay.c in
 * `make test`.
 */
#ifndef UNDERTAG_TESTS_FUZZ_H
#define UNDERTAG_TESTS_FUZZ_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistr.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

/* The made input of a number from 0, for free(); NULL behind the last one. */
uint8_t *fuzz_made(size_t number, size_t *ret_size);

/* A property: holds in every build, and says what was expected of which input. */
#define FUZZ_CHECK(expected)                                                                       \
    do {                                                                                           \
        if (!(expected)) {                                                                         \
            (void)fprintf(stderr, "%s:%d: does not hold: %s\n", __FILE__, __LINE__, #expected);    \
            abort();                                                                               \
        }                                                                                          \
    } while (0)

/* --- an input, taken from its beginning --- */

struct fuzz_input {
    const uint8_t *data;
    size_t size;
};

/* The next byte; 0 where none is left. */
static inline uint8_t fuzz_byte(struct fuzz_input *input)
{
    if (input->size == 0) {
        return 0;
    }
    input->size--;
    return *input->data++;
}

/* Little-endian; what is not there is 0. */
static inline uint32_t fuzz_u32(struct fuzz_input *input)
{
    uint32_t value = 0;
    for (unsigned i = 0; i < 4; i++) {
        value |= (uint32_t)fuzz_byte(input) << 8 * i;
    }
    return value;
}

/* At most so many of the next bytes. */
static inline struct fuzz_input fuzz_part(struct fuzz_input *input, size_t most)
{
    size_t size = most < input->size ? most : input->size;
    struct fuzz_input part = {.data = input->data, .size = size};
    input->data += size;
    input->size -= size;
    return part;
}

/* What comes before the next `end`, which is taken, too; everything where there is none. */
static inline struct fuzz_input fuzz_until(struct fuzz_input *input, char end)
{
    const uint8_t *found = input->size > 0 ? memchr(input->data, end, input->size) : NULL;
    struct fuzz_input part = fuzz_part(input, found ? (size_t)(found - input->data) : input->size);
    (void)fuzz_byte(input);
    return part;
}

/* --- bytes of their own, so that a sanitizer sees what is read beyond them --- */

static inline void *fuzz_room(size_t size)
{
    void *room = malloc(size > 0 ? size : 1);
    if (!room) {
        (void)fputs("the target has no memory\n", stderr);
        exit(1); /* not a finding */
    }
    return room;
}

static inline char *fuzz_copy(struct fuzz_input part)
{
    char *copy = fuzz_room(part.size);
    if (part.size > 0) {
        memcpy(copy, part.data, part.size);
    }
    return copy;
}

/* The same, ended by NUL, with '?' for what is no UTF-8 and for NUL. */
static inline char *fuzz_text(struct fuzz_input part)
{
    char *text = fuzz_room(part.size + 1);
    for (size_t i = 0; i < part.size; i++) {
        text[i] = (char)(part.data[i] != 0 ? part.data[i] : (uint8_t)'?');
    }
    text[part.size] = '\0';
    const uint8_t *bad = (const uint8_t *)text;
    while ((bad = u8_check(bad, part.size - (size_t)(bad - (const uint8_t *)text)))) {
        text[bad - (const uint8_t *)text] = '?';
    }
    return text;
}

/* Whether a sentence for people is one: there is something, in UTF-8, without control characters.
 */
static inline bool fuzz_is_sentence(const char *text)
{
    for (const char *at = text; *at != '\0'; at++) {
        if ((unsigned char)*at < 0x20 || *at == 0x7F) {
            return false;
        }
    }
    return text[0] != '\0' && !u8_check((const uint8_t *)text, strlen(text));
}

/* --- made inputs --- */

/* `piece`, so many times, between `before` and `behind`. */
static inline uint8_t *fuzz_repeated(const char *before, const char *piece, size_t times,
                                     const char *behind, size_t *ret_size)
{
    size_t first = strlen(before);
    size_t each = strlen(piece);
    size_t last = strlen(behind);
    uint8_t *made = fuzz_room(first + each * times + last);
    memcpy(made, before, first);
    for (size_t i = 0; i < times; i++) {
        memcpy(made + first + i * each, piece, each);
    }
    memcpy(made + first + each * times, behind, last);
    *ret_size = first + each * times + last;
    return made;
}

#endif
