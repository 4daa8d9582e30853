/*
 * memory_shares: how the memory budget is divided among what can grow.
 */
#ifndef UNDERTAG_MEMORY_SHARES_H
#define UNDERTAG_MEMORY_SHARES_H

#include <stdint.h>

struct memory_shares {
    uint64_t dictionary; /* words in memory */
    uint64_t weights;    /* postings in memory, and what is kept of each tag */
    uint64_t changed;    /* what waits to be stored, with the pages that storing it takes */
};

/* Divides a budget of which `taken` bytes are not to be had: tables and buffers that others hold.
 * However much that is, each share stays large enough to go on with. */
struct memory_shares memory_shares_of(uint64_t budget, uint64_t taken);

/* The least budget that memory does not outgrow, where so many bytes are not to be had. */
uint64_t memory_shares_least_budget(uint64_t taken);

#endif
