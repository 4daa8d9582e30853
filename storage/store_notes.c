#include "storage/store_notes.h"

#include <stdbool.h>
#include <stdio.h>
#include <string.h>

#include "storage/store_private.h"

/* Notes stand in the table of the store's first record, behind a prefix that it does not begin
 * with. */
static const char PREFIX[] = "note/";

enum {
    KEY_BYTES = sizeof PREFIX + STORE_NOTE_NAME_BYTES
};

/* False where the name is too long. */
static bool make_key(const char *name, char key[KEY_BYTES], size_t *ret_size)
{
    int length = snprintf(key, KEY_BYTES, "%s%s", PREFIX, name);
    if (length < 0 || length >= KEY_BYTES) {
        return false;
    }
    *ret_size = (size_t)length;
    return true;
}

static int fail_name(struct store_error *error)
{
    return store_fail(error, STORE_DENIED, "a note's name is too long");
}

int store_get_note(struct store_view *view, const char *name, struct codec_writer *into,
                   struct store_error *error)
{
    char key[KEY_BYTES];
    size_t key_bytes = 0;
    struct kv_bytes value = {0};
    if (!make_key(name, key, &key_bytes)) {
        return fail_name(error);
    }
    int result = kv_get(view->txn, TABLE_META, kv_bytes_of(key, key_bytes), &value, error);
    if (result != STORE_OK) {
        return result;
    }
    struct codec_reader reader = {.data = value.data, .size = value.size};
    uint32_t checksum = codec_get_u32(&reader);
    if (reader.failed ||
        codec_checksum(reader.data + reader.at, reader.size - reader.at) != checksum) {
        return store_fail(error, STORE_CORRUPT, "the store's note '%s' is damaged", name);
    }
    codec_reset(into);
    codec_put_raw(into, reader.data + reader.at, reader.size - reader.at);
    return into->failed ? (int)store_fail(error, STORE_NO_MEMORY, "out of memory") : STORE_OK;
}

int store_put_note(struct store_view *view, const char *name, const void *data, size_t size,
                   struct store_error *error)
{
    char key[KEY_BYTES];
    size_t key_bytes = 0;
    if (size > STORE_NOTE_BYTES) {
        return store_fail(error, STORE_DENIED, "the note '%s' is too long: %zu bytes", name, size);
    }
    if (!make_key(name, key, &key_bytes)) {
        return fail_name(error);
    }
    struct codec_writer record = {0};
    codec_put_u32(&record, codec_checksum(data, size));
    codec_put_raw(&record, data, size);
    int result = record.failed ? (int)store_fail(error, STORE_NO_MEMORY, "out of memory")
                               : kv_put(view->txn, TABLE_META, kv_bytes_of(key, key_bytes),
                                        kv_bytes_of(record.data, record.size), error);
    codec_deinit(&record);
    return result;
}
