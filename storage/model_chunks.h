/*
 * model_chunks: the stored chunks of postings, in two tables. `chunks` has each as it once was;
 * `news` has what has changed since, as a difference, for those that have changed. An item changes
 * a few postings of many chunks, which lie far apart: so a writing goes to the pages of a small
 * table, and not to a page for each chunk. When the news have grown beyond their share, a writing
 * also settles some of them: the chunks of a stretch of neighbouring words are written as they are
 * by then, and their news go. A writing of so many chunks that next to all pages change anyway
 * makes no news of them.
 *
 * The checksum of an entry of `news` is that of the chunk as it is with it: it proves both.
 */
#ifndef UNDERTAG_MODEL_CHUNKS_H
#define UNDERTAG_MODEL_CHUNKS_H

#include <stdbool.h>
#include <stdint.h>

#include "storage/kv.h"

enum {
    MODEL_CHUNKS_KEY = 8,         /* bytes: word and number */
    MODEL_CHUNKS_NEWS_PART = 12,  /* the news' share of the chunks' pages */
    MODEL_CHUNKS_LEAST_NEWS = 64, /* or so many pages, that are never settled */
    MODEL_CHUNKS_MANY_PART = 8    /* of all chunks, and more, are many */
};

/* Whether a writing that puts so many chunks puts them whole. */
int model_chunks_are_many(struct kv_txn *txn, uint64_t count, bool *ret_many,
                          struct store_error *error) __attribute__((warn_unused_result));

/* Puts what a chunk is from now on: as news, or whole. */
int model_chunks_put(struct kv_txn *txn, struct kv_bytes key, struct kv_bytes body, bool is_whole,
                     struct store_error *error) __attribute__((warn_unused_result));

/* Where settling goes on. Zero-initialised: with the first word. */
struct model_chunks_settled {
    unsigned char next[MODEL_CHUNKS_KEY];
};

/* Settles until the news keep to their share. */
int model_chunks_settle(struct kv_txn *txn, struct model_chunks_settled *settled,
                        struct store_error *error) __attribute__((warn_unused_result));

/* A chunk's body out of the records of both tables; `news` has no data where there are none. It is
 * the record's own, or stands in `room`, of KV_VALUE_BYTES. False where they are damaged. */
bool model_chunks_open(struct kv_bytes key, struct kv_bytes record, struct kv_bytes news,
                       unsigned char *room, struct kv_bytes *ret_body);

/* --- reading, in rising order best --- */

struct model_chunks_reader {
    struct kv_cursor *chunks; /* NULL until they are needed */
    struct kv_cursor *news;
    bool is_at_chunk;
    uint32_t word; /* where it is */
    uint32_t number;
    struct kv_bytes news_key; /* the first news behind where it is; no data: there are none */
    struct kv_bytes news_value;
    unsigned char room[KV_VALUE_BYTES];
};

void model_chunks_deinit(struct model_chunks_reader *reader);

/* A chunk's body, valid until the next is read. */
int model_chunks_read(struct model_chunks_reader *reader, struct kv_txn *txn, uint32_t word,
                      uint32_t number, struct kv_bytes *ret_body, struct store_error *error)
    __attribute__((warn_unused_result));

#endif
