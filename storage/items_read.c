#include <stdlib.h>
#include <string.h>

#include "storage/items_private.h"
#include "storage/proof.h"
#include "storage/store_private.h"

/* --- ids ---------------------------------------------------------------------------------------
 */

int items_entry(struct store_view *view, struct store_text id, struct id_entry *ret_entry,
                struct store_error *error)
{
    struct kv_bytes value = {0};
    struct kv_bytes key = kv_bytes_of(id.data, id.size);
    int result = kv_get(view->txn, TABLE_IDS, key, &value, error);
    if (result != STORE_OK) {
        return result;
    }
    if (!proof_holds(key, value, ID_ENTRY_BYTES)) {
        return store_fail(error, STORE_CORRUPT, "the entry of the id '%.*s' is damaged",
                          (int)id.size, id.data);
    }
    struct codec_reader reader = {.data = value.data, .size = value.size};
    ret_entry->seq = codec_get_u64(&reader);
    ret_entry->withdrawn = codec_get_u8(&reader) != 0;
    return STORE_OK;
}

int items_find(struct store_view *view, struct store_text id, uint64_t *ret_seq,
               struct store_error *error)
{
    struct id_entry entry = {0};
    int result = items_entry(view, id, &entry, error);
    if (result == STORE_OK && entry.withdrawn) {
        return STORE_NOT_FOUND;
    }
    if (result == STORE_OK) {
        *ret_seq = entry.seq;
    }
    return result;
}

/* --- reading -----------------------------------------------------------------------------------
 */

void item_buffer_deinit(struct item_buffer *buffer)
{
    codec_deinit(&buffer->record);
    free(buffer->numbers);
    free(buffer->rulings);
    free(buffer->seconds);
    memset(buffer, 0, sizeof *buffer);
}

struct store_text item_get_text(struct codec_reader *reader)
{
    struct store_text text;
    text.data = codec_get_blob(reader, &text.size);
    return text;
}

struct numbers item_get_numbers(struct codec_reader *reader, struct item_buffer *buffer,
                                size_t *used)
{
    size_t count = codec_get_u32(reader);
    if (count > (reader->size - reader->at) / sizeof(uint32_t) ||
        count > buffer->number_capacity - *used) {
        reader->failed = true;
        return (struct numbers){0};
    }
    if (count == 0) {
        return (struct numbers){0}; /* there may be no buffer at all */
    }
    uint32_t *list = buffer->numbers + *used;
    for (size_t i = 0; i < count; i++) {
        list[i] = codec_get_u32(reader);
    }
    *used += count;
    return (struct numbers){.list = list, .count = count};
}

/* Makes room for all numbers that the record may hold, and for what follows from them. */
static int reserve_numbers(struct item_buffer *buffer, size_t stored, struct store_error *error)
{
    size_t room = item_evidence_room(stored);
    if (room > buffer->number_capacity) {
        uint32_t *grown = realloc(buffer->numbers, room * sizeof *grown);
        if (!grown) {
            return items_no_memory(error);
        }
        buffer->numbers = grown;
        buffer->number_capacity = room;
    }
    return STORE_OK;
}

static int decode_item(struct codec_reader *reader, struct item_buffer *buffer,
                       struct item_record *record, struct store_error *error)
{
    record->tagger = item_get_text(reader);
    record->filed_at = item_get_text(reader);
    struct store_text content = item_get_text(reader);
    struct codec_reader inner = {.data = (const unsigned char *)content.data, .size = content.size};
    record->title = item_get_text(&inner);
    record->text = item_get_text(&inner);
    record->fields = item_get_text(&inner);
    record->language = item_get_text(&inner);
    /* Four bytes are the least that a number takes. */
    size_t bytes = inner.size - inner.at + reader->size - reader->at;
    int result = reserve_numbers(buffer, bytes / sizeof(uint32_t), error);
    if (result != STORE_OK) {
        return result;
    }
    size_t used = 0;
    record->filed = item_get_numbers(&inner, buffer, &used);
    record->prompted = item_get_numbers(&inner, buffer, &used);
    record->declined = item_get_numbers(&inner, buffer, &used);
    reader->failed = reader->failed || inner.failed;
    return item_evidence_get(reader, buffer, used, record, error);
}

static int decode(uint64_t seq, struct item_buffer *buffer, struct item_record *ret_record,
                  struct store_error *error)
{
    struct codec_reader reader = {.data = buffer->record.data, .size = buffer->record.size};
    struct item_record record = {.seq = seq, .change = ITEM_WITHDRAWN};
    uint8_t kind = codec_get_u8(&reader);
    record.replaced = codec_get_u64(&reader);
    record.stored_at_ms = (int64_t)codec_get_u64(&reader);
    record.uid = codec_get_u32(&reader);
    record.id = item_get_text(&reader);
    if (kind == RECORD_ITEM) {
        int result = decode_item(&reader, buffer, &record, error);
        if (result != STORE_OK) {
            return result;
        }
    }
    bool has_id = record.id.size > 0 && record.id.size <= ID_BYTES;
    if (reader.failed || !has_id || (kind != RECORD_ITEM && kind != RECORD_WITHDRAWAL)) {
        return store_fail(error, STORE_CORRUPT, "the record of change %llu is damaged",
                          (unsigned long long)seq);
    }
    *ret_record = record;
    return STORE_OK;
}

struct store_text items_stored_content(const struct codec_writer *record)
{
    struct codec_reader reader = {.data = record->data, .size = record->size};
    (void)codec_get_u8(&reader);
    (void)codec_get_u64(&reader);
    (void)codec_get_u64(&reader);
    (void)codec_get_u32(&reader);
    (void)item_get_text(&reader); /* id, tagger, filed_at: passed over */
    (void)item_get_text(&reader);
    (void)item_get_text(&reader);
    return item_get_text(&reader);
}

int items_read(struct store_view *view, uint64_t seq, struct item_buffer *buffer,
               struct item_record *ret_record, struct store_error *error)
{
    int result = records_get(view, seq, &buffer->record, error);
    return result == STORE_OK ? decode(seq, buffer, ret_record, error) : result;
}

int items_changed(struct store_view *view, uint64_t since, size_t most,
                  int (*each)(void *user, const struct item_record *record), void *user,
                  struct item_buffer *buffer, uint64_t *ret_next, struct store_error *error)
{
    uint64_t last = since;
    size_t given = 0;
    while (given < most && last < UINT64_MAX) {
        uint64_t seq = 0;
        struct item_record record = {0};
        struct id_entry entry = {0};
        int result = records_next(view, last + 1, &seq, error);
        if (result == STORE_NOT_FOUND) {
            *ret_next = view->totals.seq > since ? view->totals.seq : since;
            return STORE_OK;
        }
        if (result == STORE_OK) {
            result = items_read(view, seq, buffer, &record, error);
        }
        if (result == STORE_OK) {
            result = items_entry(view, record.id, &entry, error);
        }
        if (result == STORE_OK && entry.seq == seq) {
            given++;
            result = each(user, &record);
        }
        if (result != STORE_OK) {
            return result;
        }
        last = seq;
    }
    *ret_next = last;
    return STORE_OK;
}
