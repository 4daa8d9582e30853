/*
 * siphash: a keyed hash for tables that hold strings from outside (SipHash-2-4, Aumasson &
 * Bernstein 2012): without the key nobody can make strings that collide.
 */
#ifndef UNDERTAG_SIPHASH_H
#define UNDERTAG_SIPHASH_H

#include <stddef.h>
#include <stdint.h>

struct siphash_key {
    uint64_t low;
    uint64_t high;
};

/* The hash of `bytes` bytes. Pure; any thread. */
uint64_t siphash(const struct siphash_key *key, const void *data, size_t bytes);

#endif
