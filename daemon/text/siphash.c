#include "daemon/text/siphash.h"

#include <string.h>

static uint64_t rotate_left(uint64_t value, unsigned bits)
{
    return (value << bits) | (value >> (64U - bits));
}

static void sip_rounds(uint64_t v[4], int rounds)
{
    for (int i = 0; i < rounds; i++) {
        v[0] += v[1];
        v[1] = rotate_left(v[1], 13) ^ v[0];
        v[0] = rotate_left(v[0], 32);
        v[2] += v[3];
        v[3] = rotate_left(v[3], 16) ^ v[2];
        v[0] += v[3];
        v[3] = rotate_left(v[3], 21) ^ v[0];
        v[2] += v[1];
        v[1] = rotate_left(v[1], 17) ^ v[2];
        v[2] = rotate_left(v[2], 32);
    }
}

/* Up to eight bytes as a little-endian number. */
static uint64_t read_little_endian(const unsigned char *data, size_t bytes)
{
    uint64_t word = 0;
    for (size_t i = 0; i < bytes; i++) {
        word |= (uint64_t)data[i] << (8 * i);
    }
    return word;
}

uint64_t siphash(const struct siphash_key *key, const void *data, size_t bytes)
{
    const unsigned char *at = data;
    uint64_t v[4] = {key->low ^ 0x736f6d6570736575U, key->high ^ 0x646f72616e646f6dU,
                     key->low ^ 0x6c7967656e657261U, key->high ^ 0x7465646279746573U};
    size_t whole = bytes / 8;
    for (size_t i = 0; i < whole; i++, at += 8) {
        uint64_t word = read_little_endian(at, 8);
        v[3] ^= word;
        sip_rounds(v, 2);
        v[0] ^= word;
    }
    uint64_t last = read_little_endian(at, bytes % 8) | ((uint64_t)(bytes & 0xff) << 56);
    v[3] ^= last;
    sip_rounds(v, 2);
    v[0] ^= last;
    v[2] ^= 0xff;
    sip_rounds(v, 4);
    return v[0] ^ v[1] ^ v[2] ^ v[3];
}
