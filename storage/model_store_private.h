/*
 * model_store_private: the model store's own insides, for the files that are it together:
 * model_store (life, writing), model_store_read (what is held in memory), model_view (what is not)
 * and model_walk (all of it).
 */
#ifndef UNDERTAG_MODEL_STORE_PRIVATE_H
#define UNDERTAG_MODEL_STORE_PRIVATE_H

#include "storage/codec.h"
#include "storage/kv.h"
#include "storage/model_cells.h"
#include "storage/model_chunks.h"
#include "storage/model_store.h"

enum model_table {
    MODEL_META,
    MODEL_WORDS,
    MODEL_CHUNKS,
    MODEL_TAGS,
    MODEL_FIGURES,
    MODEL_ENTRIES,
    MODEL_COUNTS,
    MODEL_NEWS,
    MODEL_TABLES
};

struct model_store {
    struct kv *kv;
    struct model_chunks_settled settled; /* whoever commits has it */
};

/* As model_store_open, in another folder of the home. */
int model_store_open_in(const struct store_settings *settings, const char *folder,
                        struct model_store **ret_store, struct store_error *error)
    __attribute__((warn_unused_result));

/* What changes with every item: the counts of words and what is known of tags, by their numbers. */
extern const struct model_cells MODEL_CELLS_COUNTS;
extern const struct model_cells MODEL_CELLS_TAGS;

/* The key of the one record in MODEL_META. */
static inline struct kv_bytes model_store_head_key(void)
{
    return kv_bytes_of("model", 5);
}

/* The head, in a transaction. STORE_NOT_FOUND where no model has been stored yet. */
int model_store_get_head(struct kv_txn *txn, struct model_store_head *ret_head,
                         struct store_error *error) __attribute__((warn_unused_result));

struct model_view;

/* The transaction of a view. */
struct kv_txn *model_view_txn(struct model_view *view);

/* Reads a word's record, and its count. */
int model_store_read_word(struct kv_txn *txn, struct kv_bytes key, struct kv_bytes value,
                          struct model_store_word *ret_word, struct store_error *error)
    __attribute__((warn_unused_result));

/* The body of a checked record: what follows the checksum, which is that of key and body. */
int model_store_open_record(struct kv_bytes key, struct kv_bytes value, const char *what,
                            struct codec_reader *ret_reader, struct store_error *error)
    __attribute__((warn_unused_result));

#endif
