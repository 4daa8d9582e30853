#include "storage/model_view.h"

#include <stdlib.h>
#include <string.h>

#include "storage/model_store_private.h"

/* What an entry's list is read into. */
struct tagged_room {
    uint32_t tags[MODEL_STORE_ENTRY_TAGS];
    float values[MODEL_STORE_ENTRY_TAGS * MODEL_STORE_PAIR_VALUES];
};

static struct model_store_tagged get_tagged(struct codec_reader *reader, uint32_t values_each,
                                            struct tagged_room *room)
{
    uint32_t count = codec_get_u32(reader);
    if (count > MODEL_STORE_ENTRY_TAGS) {
        reader->failed = true;
        count = 0;
    }
    for (uint32_t i = 0; i < count; i++) {
        room->tags[i] = codec_get_u32(reader);
        for (uint32_t j = 0; j < values_each; j++) {
            room->values[i * values_each + j] = codec_get_f32(reader);
        }
    }
    return (struct model_store_tagged){.count = count, .tags = room->tags, .values = room->values};
}

struct model_view {
    struct kv_txn *txn;
    struct model_chunks_reader chunks;
    struct kv_cursor *entries; /* NULL until it is needed */
    bool is_at_entry;
    uint64_t entry;
    struct tagged_room gaps;
    struct tagged_room pairs;
};

int model_view_open(struct model_store *store, struct model_view **ret_view,
                    struct store_error *error)
{
    struct model_view *made = calloc(1, sizeof *made);
    if (!made) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    int result = kv_begin(store->kv, false, &made->txn, error);
    if (result != STORE_OK) {
        free(made);
        return result;
    }
    *ret_view = made;
    return STORE_OK;
}

void model_view_close(struct model_view *view)
{
    if (view) {
        model_chunks_deinit(&view->chunks);
        kv_cursor_close(view->entries);
        kv_abort(view->txn);
        free(view);
    }
}

struct kv_txn *model_view_txn(struct model_view *view)
{
    return view->txn;
}

static int need_cursor(const struct model_view *view, enum model_table table,
                       struct kv_cursor **cursor, struct store_error *error)
{
    return *cursor ? STORE_OK : kv_cursor_open(view->txn, table, cursor, error);
}

/* --- chunks -------------------------------------------------------------------------------------
 */

int model_view_chunk(struct model_view *view, uint32_t word, uint32_t number,
                     struct kv_bytes *ret_bytes, struct store_error *error)
{
    return model_chunks_read(&view->chunks, view->txn, word, number, ret_bytes, error);
}

/* --- words --------------------------------------------------------------------------------------
 */

static int read_count(struct kv_txn *txn, uint32_t number, uint32_t *ret_count,
                      struct store_error *error)
{
    const unsigned char *cell = NULL;
    int result = model_cells_get(&MODEL_CELLS_COUNTS, txn, number, &cell, error);
    if (result == STORE_OK) {
        struct codec_reader reader = {.data = cell, .size = MODEL_CELLS_COUNTS.cell_bytes};
        *ret_count = codec_get_u32(&reader);
    }
    return result;
}

int model_store_read_word(struct kv_txn *txn, struct kv_bytes key, struct kv_bytes value,
                          struct model_store_word *ret_word, struct store_error *error)
{
    struct codec_reader reader;
    int result = model_store_open_record(key, value, "word", &reader, error);
    if (result != STORE_OK) {
        return result;
    }
    struct model_store_word word = {.term = key.data, .term_bytes = key.size};
    word.number = codec_get_u32(&reader);
    result = reader.failed ? STORE_NOT_FOUND : read_count(txn, word.number, &word.count, error);
    if (result == STORE_NOT_FOUND) {
        return store_fail(error, STORE_CORRUPT, "a stored word of the model is damaged");
    }
    if (result == STORE_OK) {
        *ret_word = word;
    }
    return result;
}

int model_view_word(struct model_view *view, const char *term, size_t term_bytes,
                    struct model_store_word *ret_word, struct store_error *error)
{
    struct kv_bytes value = {0};
    struct kv_bytes key = kv_bytes_of(term, term_bytes);
    int result = kv_get(view->txn, MODEL_WORDS, key, &value, error);
    return result == STORE_OK ? model_store_read_word(view->txn, key, value, ret_word, error)
                              : result;
}

/* --- entries ------------------------------------------------------------------------------------
 */

static int decode_entry(struct model_view *view, struct kv_bytes key, struct kv_bytes value,
                        struct model_store_entry *ret_entry, struct store_error *error)
{
    struct codec_reader reader;
    int result = model_store_open_record(key, value, "entry", &reader, error);
    if (result != STORE_OK) {
        return result;
    }
    struct model_store_entry entry = {.number = codec_u64_of_key(key.data)};
    entry.scored = codec_get_u64(&reader);
    entry.counted = codec_get_u64(&reader);
    entry.promise = codec_get_f32(&reader);
    entry.gaps = get_tagged(&reader, MODEL_STORE_GAP_VALUES, &view->gaps);
    entry.pairs = get_tagged(&reader, MODEL_STORE_PAIR_VALUES, &view->pairs);
    if (reader.failed) {
        return store_fail(error, STORE_CORRUPT, "a stored entry of the model is damaged");
    }
    *ret_entry = entry;
    return STORE_OK;
}

int model_view_entry(struct model_view *view, uint64_t number, struct model_store_entry *ret_entry,
                     struct store_error *error)
{
    unsigned char key[8];
    codec_key_u64(key, number);
    struct kv_bytes value = {0};
    int result = kv_get(view->txn, MODEL_ENTRIES, kv_bytes_of(key, sizeof key), &value, error);
    return result == STORE_OK
               ? decode_entry(view, kv_bytes_of(key, sizeof key), value, ret_entry, error)
               : result;
}

int model_view_entry_after(struct model_view *view, uint64_t number,
                           struct model_store_entry *ret_entry, struct store_error *error)
{
    if (number == UINT64_MAX) {
        return STORE_NOT_FOUND;
    }
    unsigned char from[8];
    codec_key_u64(from, number + 1);
    struct kv_bytes key = {0};
    struct kv_bytes value = {0};
    int result = need_cursor(view, MODEL_ENTRIES, &view->entries, error);
    if (result != STORE_OK) {
        return result;
    }
    bool is_next = view->is_at_entry && view->entry == number;
    result = is_next ? kv_next(view->entries, &key, &value, error)
                     : kv_seek(view->entries, kv_bytes_of(from, sizeof from), &key, &value, error);
    if (result == STORE_OK) {
        result = decode_entry(view, key, value, ret_entry, error);
    }
    view->is_at_entry = result == STORE_OK;
    view->entry = result == STORE_OK ? ret_entry->number : 0;
    return result;
}
