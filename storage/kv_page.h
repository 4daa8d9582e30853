/*
 * kv_page: how LMDB lays a file out, in data version 1 (0.9), for those who go over its pages
 * themselves: kv_scrub.c and kv_pages.c. Numbers are in the machine's own order of bytes.
 */
#ifndef UNDERTAG_KV_PAGE_H
#define UNDERTAG_KV_PAGE_H

#include <stddef.h>
#include <stdint.h>

enum {
    KV_FREE_TABLE = 0,    /* LMDB's own list of free pages: transaction -> count, then pages */
    KV_FIRST_PAGE = 2,    /* behind the two that hold the roots */
    KV_PAGE_BRANCH = 0x1, /* flags of a page */
    KV_PAGE_LEAF = 0x2,
    KV_PAGE_OVERFLOW = 0x4, /* the first of a run that holds one large value */
    KV_NODE_LARGE = 0x1,    /* flags of a leaf's entry: the value is the number of such a page, */
    KV_NODE_TABLE = 0x2     /* or a table's head */
};

/* How every page begins. The places of a table page's entries follow, two bytes each. */
struct kv_page_header {
    uint64_t number;
    uint16_t padding;
    uint16_t flags;
    union {
        struct {
            uint16_t lower; /* the gap, in bytes from the page's start */
            uint16_t upper;
        } gap;
        uint32_t run; /* pages of an overflow run */
    } size;
};

/* How an entry begins; its key follows, then its value. */
struct kv_node_header {
    uint32_t low;   /* a leaf's: bytes of the value; a branch's: bits of a page number, */
    uint16_t flags; /* with the higher ones here */
    uint16_t key_bytes;
};

/* Where a table is, and what it should hold. */
struct kv_table_head {
    uint32_t padding;
    uint16_t flags;
    uint16_t depth;
    uint64_t branch_pages;
    uint64_t leaf_pages;
    uint64_t overflow_pages;
    uint64_t entries;
    uint64_t root; /* UINT64_MAX: it is empty */
};

/* What the first two pages hold behind their headers; the later transaction's is the right one. */
struct kv_roots {
    uint32_t magic;
    uint32_t version;
    uint64_t address;
    uint64_t map_bytes;
    struct kv_table_head free;
    struct kv_table_head main; /* the names of the tables */
    uint64_t last_page;
    uint64_t transaction;
};

#endif
