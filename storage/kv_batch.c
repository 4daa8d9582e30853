/*
 * Changes lie one behind the other in blocks: a head, the key, the value. A block goes as soon as
 * its changes are made, since the transaction's pages take their place.
 */
#include "storage/kv_batch.h"

#include <stdlib.h>
#include <string.h>

enum {
    BLOCK_BYTES = 256 << 10
};

enum change_kind {
    CHANGE_PUT,
    CHANGE_DELETE,
    CHANGE_DELETE_ALL
};

struct change_head {
    enum change_kind kind;
    unsigned table;
    uint32_t key_bytes;
    uint32_t value_bytes;
};

struct batch_block {
    struct batch_block *after;
    size_t used;
    unsigned char bytes[BLOCK_BYTES];
};

struct kv_batch {
    struct batch_block *first;
    struct batch_block *last;
    uint64_t bytes;
};

int kv_batch_new(struct kv_batch **ret_batch, struct store_error *error)
{
    struct kv_batch *made = calloc(1, sizeof *made);
    if (!made) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    *ret_batch = made;
    return STORE_OK;
}

static void drop_first(struct kv_batch *batch)
{
    struct batch_block *block = batch->first;
    batch->first = block->after;
    batch->last = batch->first ? batch->last : NULL;
    batch->bytes -= sizeof *block;
    free(block);
}

static void empty(struct kv_batch *batch)
{
    while (batch->first) {
        drop_first(batch);
    }
}

void kv_batch_free(struct kv_batch *batch)
{
    if (batch) {
        empty(batch);
        free(batch);
    }
}

uint64_t kv_batch_bytes(const struct kv_batch *batch)
{
    return sizeof *batch + batch->bytes;
}

/* --- collecting ---------------------------------------------------------------------------------
 */

static int add_block(struct kv_batch *batch)
{
    struct batch_block *block = malloc(sizeof *block);
    if (!block) {
        return STORE_NO_MEMORY;
    }
    block->after = NULL;
    block->used = 0;
    *(batch->last ? &batch->last->after : &batch->first) = block;
    batch->last = block;
    batch->bytes += sizeof *block;
    return STORE_OK;
}

static int add(struct kv_batch *batch, const struct change_head *head, const void *key,
               const void *value, struct store_error *error)
{
    size_t size = sizeof *head + head->key_bytes + head->value_bytes;
    if (size > BLOCK_BYTES) {
        return store_fail(error, STORE_BROKEN, "an entry of %zu bytes is too large", size);
    }
    if ((!batch->last || BLOCK_BYTES - batch->last->used < size) && add_block(batch) != STORE_OK) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    unsigned char *at = batch->last->bytes + batch->last->used;
    memcpy(at, head, sizeof *head);
    if (head->key_bytes > 0) {
        memcpy(at + sizeof *head, key, head->key_bytes);
    }
    if (head->value_bytes > 0) {
        memcpy(at + sizeof *head + head->key_bytes, value, head->value_bytes);
    }
    batch->last->used += size;
    return STORE_OK;
}

int kv_batch_put(struct kv_batch *batch, unsigned table, struct kv_bytes key, struct kv_bytes value,
                 struct store_error *error)
{
    const struct change_head head = {.kind = CHANGE_PUT,
                                     .table = table,
                                     .key_bytes = (uint32_t)key.size,
                                     .value_bytes = (uint32_t)value.size};
    return add(batch, &head, key.data, value.data, error);
}

int kv_batch_delete(struct kv_batch *batch, unsigned table, struct kv_bytes key,
                    struct store_error *error)
{
    const struct change_head head = {
        .kind = CHANGE_DELETE, .table = table, .key_bytes = (uint32_t)key.size};
    return add(batch, &head, key.data, NULL, error);
}

int kv_batch_delete_all(struct kv_batch *batch, unsigned table, struct kv_bytes beginning,
                        struct store_error *error)
{
    const struct change_head head = {
        .kind = CHANGE_DELETE_ALL, .table = table, .key_bytes = (uint32_t)beginning.size};
    return add(batch, &head, beginning.data, NULL, error);
}

/* --- making -------------------------------------------------------------------------------------
 */

struct deleting {
    struct kv_bytes beginning;
    bool is_done;
    struct store_error *error;
};

static int delete_one(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    struct deleting *deleting = user;
    struct kv_bytes beginning = deleting->beginning;
    (void)value;
    if (key.size < beginning.size || memcmp(key.data, beginning.data, beginning.size) != 0) {
        deleting->is_done = true;
        return STORE_NOT_FOUND;
    }
    return kv_walk_delete(at, deleting->error);
}

static int delete_all(struct kv_txn *txn, unsigned table, struct kv_bytes beginning,
                      struct store_error *error)
{
    struct deleting deleting = {.beginning = beginning, .error = error};
    if (beginning.size == 0) {
        return kv_clear(txn, table, error);
    }
    int code = kv_walk(txn, table, beginning, delete_one, &deleting, error);
    return deleting.is_done ? STORE_OK : code;
}

static int make(struct kv_txn *txn, const struct kv_batch_steps *steps,
                const struct change_head *head, const unsigned char *bytes,
                struct store_error *error)
{
    struct kv_bytes key = kv_bytes_of(bytes, head->key_bytes);
    if (head->kind == CHANGE_PUT) {
        struct kv_bytes value = kv_bytes_of(bytes + head->key_bytes, head->value_bytes);
        return steps->put && steps->put_in == head->table
                   ? steps->put(steps->user, txn, key, value, error)
                   : kv_put(txn, head->table, key, value, error);
    }
    if (head->kind == CHANGE_DELETE) {
        int code = kv_delete(txn, head->table, key, error);
        return code == STORE_NOT_FOUND ? STORE_OK : code;
    }
    return delete_all(txn, head->table, key, error);
}

static int make_block(struct kv_txn *txn, const struct kv_batch_steps *steps,
                      const struct batch_block *block, struct store_error *error)
{
    int code = STORE_OK;
    for (size_t at = 0; at < block->used && code == STORE_OK;) {
        struct change_head head;
        memcpy(&head, block->bytes + at, sizeof head);
        code = make(txn, steps, &head, block->bytes + at + sizeof head, error);
        at += sizeof head + head.key_bytes + head.value_bytes;
    }
    return code;
}

int kv_batch_commit(struct kv_batch *batch, struct kv *kv, const struct kv_batch_steps *steps,
                    struct store_error *error)
{
    static const struct kv_batch_steps none = {0};
    struct kv_txn *txn = NULL;
    int code = kv_begin(kv, true, &txn, error);
    if (code == STORE_OK && steps && steps->first) {
        code = steps->first(steps->user, txn, error);
    }
    while (code == STORE_OK && batch->first) {
        code = make_block(txn, steps ? steps : &none, batch->first, error);
        drop_first(batch);
        if (steps && steps->moved) {
            steps->moved(steps->user);
        }
    }
    empty(batch);
    if (code == STORE_OK && steps && steps->last) {
        code = steps->last(steps->user, txn, error);
    }
    if (code == STORE_OK) {
        return kv_commit(txn, error);
    }
    kv_abort(txn);
    return code;
}
