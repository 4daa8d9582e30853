/* Going along a table, one entry after the other. */
#include <stdlib.h>

#include "storage/kv_private.h"

struct kv_cursor {
    MDB_cursor *cursor;
    struct kv_txn *txn;
};

int kv_walk(struct kv_txn *txn, unsigned table, struct kv_bytes from, kv_each each, void *user,
            struct store_error *error)
{
    struct kv_cursor at = {.txn = txn};
    int code = mdb_cursor_open(txn->txn, txn->kv->tables[table], &at.cursor);
    if (code != MDB_SUCCESS) {
        return kv_translate(txn->kv, code, "walking", error);
    }
    MDB_val key = kv_to_val(from);
    MDB_val value;
    uint64_t left = 0; /* damage can lead round in a circle */
    int result = kv_count(txn, table, &left, error);
    code = mdb_cursor_get(at.cursor, &key, &value, from.size ? MDB_SET_RANGE : MDB_FIRST);
    while (code == MDB_SUCCESS && result == STORE_OK) {
        if (left-- == 0) {
            code = MDB_CORRUPTED;
            break;
        }
        result = each(user, &at, kv_from_val(key), kv_from_val(value));
        if (result == STORE_OK) {
            code = mdb_cursor_get(at.cursor, &key, &value, MDB_NEXT);
        }
    }
    mdb_cursor_close(at.cursor);
    if (code != MDB_SUCCESS && code != MDB_NOTFOUND) {
        return kv_translate(txn->kv, code, "walking", error);
    }
    return result;
}

int kv_walk_delete(struct kv_cursor *at, struct store_error *error)
{
    at->txn->deletes = true;
    return kv_translate(at->txn->kv, mdb_cursor_del(at->cursor, 0), "deleting", error);
}

int kv_cursor_open(struct kv_txn *txn, unsigned table, struct kv_cursor **ret_cursor,
                   struct store_error *error)
{
    struct kv_cursor *made = calloc(1, sizeof *made);
    if (!made) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    made->txn = txn;
    int code = mdb_cursor_open(txn->txn, txn->kv->tables[table], &made->cursor);
    if (code != MDB_SUCCESS) {
        free(made);
        return kv_translate(txn->kv, code, "opening a cursor", error);
    }
    *ret_cursor = made;
    return STORE_OK;
}

void kv_cursor_close(struct kv_cursor *cursor)
{
    if (cursor) {
        mdb_cursor_close(cursor->cursor);
        free(cursor);
    }
}

static int move(struct kv_cursor *cursor, MDB_val *key, MDB_cursor_op how, struct kv_bytes *ret_key,
                struct kv_bytes *ret_value, struct store_error *error)
{
    MDB_val value;
    int code = mdb_cursor_get(cursor->cursor, key, &value, how);
    if (code == MDB_SUCCESS) {
        *ret_key = kv_from_val(*key);
        *ret_value = kv_from_val(value);
    }
    return kv_translate(cursor->txn->kv, code, "reading", error);
}

int kv_seek(struct kv_cursor *cursor, struct kv_bytes from, struct kv_bytes *ret_key,
            struct kv_bytes *ret_value, struct store_error *error)
{
    MDB_val key = kv_to_val(from);
    return move(cursor, &key, MDB_SET_RANGE, ret_key, ret_value, error);
}

int kv_next(struct kv_cursor *cursor, struct kv_bytes *ret_key, struct kv_bytes *ret_value,
            struct store_error *error)
{
    MDB_val key = {0};
    return move(cursor, &key, MDB_NEXT, ret_key, ret_value, error);
}

int kv_last(struct kv_txn *txn, unsigned table, struct kv_bytes *ret_key,
            struct kv_bytes *ret_value, struct store_error *error)
{
    MDB_cursor *cursor = NULL;
    int code = mdb_cursor_open(txn->txn, txn->kv->tables[table], &cursor);
    if (code != MDB_SUCCESS) {
        return kv_translate(txn->kv, code, "looking for the last entry", error);
    }
    MDB_val key;
    MDB_val value;
    code = mdb_cursor_get(cursor, &key, &value, MDB_LAST);
    mdb_cursor_close(cursor);
    if (code == MDB_SUCCESS) {
        *ret_key = kv_from_val(key);
        *ret_value = kv_from_val(value);
    }
    return kv_translate(txn->kv, code, "looking for the last entry", error);
}
