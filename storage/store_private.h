/*
 * store_private: the store's own insides, for the files that are the store together: store,
 * records, items, vocabulary.
 */
#ifndef UNDERTAG_STORE_PRIVATE_H
#define UNDERTAG_STORE_PRIVATE_H

#include "storage/codec.h"
#include "storage/kv.h"
#include "storage/store.h"

enum store_table {
    TABLE_META,
    TABLE_IDS,
    TABLE_RECORDS,
    TABLE_SUPERSEDED,
    TABLE_TAGS,
    TABLE_TAG_NAMES,
    STORE_TABLES
};

struct store {
    struct kv *kv;
    unsigned char uuid[STORE_UUID_BYTES];
};

struct store_view {
    struct store *store;
    struct kv_txn *txn;
    bool write;
    struct store_totals totals; /* as of the view; a commit stores them */
};

/* --- records: a change by its seq --- */

/* Puts the record of a seq behind all others. */
int records_put(struct store_view *view, uint64_t seq, const struct codec_writer *record,
                struct store_error *error) __attribute__((warn_unused_result));

/* Copies the record into `into`, checked against its checksum. STORE_NOT_FOUND if erased. */
int records_get(struct store_view *view, uint64_t seq, struct codec_writer *into,
                struct store_error *error) __attribute__((warn_unused_result));

int records_erase(struct store_view *view, uint64_t seq, struct store_error *error)
    __attribute__((warn_unused_result));

/* The first record at or behind `seq`; STORE_NOT_FOUND behind the last. */
int records_next(struct store_view *view, uint64_t seq, uint64_t *ret_seq,
                 struct store_error *error) __attribute__((warn_unused_result));

#endif
