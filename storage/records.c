#include <string.h>

#include "storage/store_private.h"

/*
 * A record is cut into pieces under (seq, piece number), so that none leaves its leaf page and a
 * long text needs no run of free pages. The first piece begins with the size and the checksum of
 * the whole.
 */
enum {
    KEY_BYTES = 10,
    PIECE_BYTES = 1900,
    MOST_PIECES = 65536,
    HEAD_BYTES = 8
};

static void make_key(unsigned char key[KEY_BYTES], uint64_t seq, uint32_t piece)
{
    codec_key_u64(key, seq);
    key[8] = (unsigned char)(piece >> 8);
    key[9] = (unsigned char)(piece & 0xFFU);
}

static int damaged(struct store_error *error, uint64_t seq)
{
    return store_fail(error, STORE_CORRUPT, "the record of change %llu is damaged",
                      (unsigned long long)seq);
}

int records_put(struct store_view *view, uint64_t seq, const struct codec_writer *record,
                struct store_error *error)
{
    if (record->size > (size_t)PIECE_BYTES * MOST_PIECES) {
        return store_fail(error, STORE_FULL, "a record of %zu bytes is larger than the store takes",
                          record->size);
    }
    unsigned char value[HEAD_BYTES + PIECE_BYTES];
    struct codec_writer head = {.data = value, .capacity = sizeof value};
    codec_put_u32(&head, (uint32_t)record->size);
    codec_put_u32(&head, codec_checksum(record->data, record->size));
    size_t at = 0;
    for (uint32_t piece = 0; at < record->size || piece == 0; piece++) {
        size_t offset = piece == 0 ? HEAD_BYTES : 0;
        size_t size = record->size - at < PIECE_BYTES ? record->size - at : PIECE_BYTES;
        unsigned char key[KEY_BYTES];
        make_key(key, seq, piece);
        memcpy(value + offset, record->data + at, size);
        int result = kv_append(view->txn, TABLE_RECORDS, kv_bytes_of(key, sizeof key),
                               kv_bytes_of(value, offset + size), error);
        if (result != STORE_OK) {
            return result;
        }
        at += size;
    }
    return STORE_OK;
}

int records_get(struct store_view *view, uint64_t seq, struct codec_writer *into,
                struct store_error *error)
{
    codec_reset(into);
    size_t size = 0;
    uint32_t checksum = 0;
    for (uint32_t piece = 0; into->size < size || piece == 0; piece++) {
        unsigned char key[KEY_BYTES];
        make_key(key, seq, piece);
        struct kv_bytes value = {0};
        int result = kv_get(view->txn, TABLE_RECORDS, kv_bytes_of(key, sizeof key), &value, error);
        if (result == STORE_NOT_FOUND && piece > 0) {
            return damaged(error, seq);
        }
        if (result != STORE_OK) {
            return result;
        }
        struct codec_reader reader = {.data = value.data, .size = value.size};
        if (piece == 0) {
            size = codec_get_u32(&reader);
            checksum = codec_get_u32(&reader);
        }
        if (reader.failed) {
            return damaged(error, seq);
        }
        codec_put_raw(into, reader.data + reader.at, reader.size - reader.at);
        if (into->failed) {
            return store_fail(error, STORE_NO_MEMORY, "out of memory");
        }
    }
    if (into->size != size || codec_checksum(into->data, size) != checksum) {
        return damaged(error, seq);
    }
    return STORE_OK;
}

int records_erase(struct store_view *view, uint64_t seq, struct store_error *error)
{
    for (uint32_t piece = 0;; piece++) {
        unsigned char key[KEY_BYTES];
        make_key(key, seq, piece);
        int result = kv_delete(view->txn, TABLE_RECORDS, kv_bytes_of(key, sizeof key), error);
        if (result == STORE_NOT_FOUND) {
            return STORE_OK;
        }
        if (result != STORE_OK) {
            return result;
        }
    }
}

static int take_seq(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    (void)at;
    (void)value;
    *(uint64_t *)user = codec_u64_of_key(key.data);
    return STORE_STOPPED;
}

int records_next(struct store_view *view, uint64_t seq, uint64_t *ret_seq,
                 struct store_error *error)
{
    unsigned char key[KEY_BYTES];
    make_key(key, seq, 0);
    uint64_t found = 0;
    int result =
        kv_walk(view->txn, TABLE_RECORDS, kv_bytes_of(key, sizeof key), take_seq, &found, error);
    if (result == STORE_STOPPED) {
        *ret_seq = found;
        return STORE_OK;
    }
    return result == STORE_OK ? STORE_NOT_FOUND : result;
}
