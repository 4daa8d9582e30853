/*
 * kv_batch: changes to tables that are collected first and made later, in one transaction and in
 * the order in which they were collected: by another thread, say, while the one that collects goes
 * on. A batch copies what it is given.
 *
 * Not locked: one thread at a time.
 */
#ifndef UNDERTAG_KV_BATCH_H
#define UNDERTAG_KV_BATCH_H

#include <stdint.h>

#include "storage/kv.h"

struct kv_batch;

/* Returns STORE_OK or STORE_NO_MEMORY. */
int kv_batch_new(struct kv_batch **ret_batch, struct store_error *error)
    __attribute__((warn_unused_result));
void kv_batch_free(struct kv_batch *batch);

/* Bytes of memory that it takes. */
uint64_t kv_batch_bytes(const struct kv_batch *batch);

/* Each returns STORE_OK, or STORE_NO_MEMORY with nothing added. */
int kv_batch_put(struct kv_batch *batch, unsigned table, struct kv_bytes key, struct kv_bytes value,
                 struct store_error *error) __attribute__((warn_unused_result));
/* An entry that is not there when its turn comes is no error. */
int kv_batch_delete(struct kv_batch *batch, unsigned table, struct kv_bytes key,
                    struct store_error *error) __attribute__((warn_unused_result));
/* All entries whose keys begin so; an empty one: the whole table. */
int kv_batch_delete_all(struct kv_batch *batch, unsigned table, struct kv_bytes beginning,
                        struct store_error *error) __attribute__((warn_unused_result));

/* What else is to be done on the way. Each may be NULL, and returns STORE_OK or what ends it. */
struct kv_batch_steps {
    void *user;
    /* Before any change is made. */
    int (*first)(void *user, struct kv_txn *txn, struct store_error *error);
    /* Instead of a put of the table `put_in`. */
    unsigned put_in;
    int (*put)(void *user, struct kv_txn *txn, struct kv_bytes key, struct kv_bytes value,
               struct store_error *error);
    /* Now and then, some entries further: for whoever watches that it goes on. */
    void (*moved)(void *user);
    /* Once all changes have been made, before they are committed. */
    int (*last)(void *user, struct kv_txn *txn, struct store_error *error);
};

/* Makes the changes in a transaction of its own, and gives their memory back on the way: whatever
 * comes of it, the batch is empty then. On failure nothing is changed. `steps` may
 * be NULL. */
int kv_batch_commit(struct kv_batch *batch, struct kv *kv, const struct kv_batch_steps *steps,
                    struct store_error *error) __attribute__((warn_unused_result));

#endif
