#include <stdlib.h>
#include <string.h>

#include "storage/items_private.h"
#include "storage/store_private.h"

/* --- ids ---------------------------------------------------------------------------------------
 */

int items_entry(struct store_view *view, struct store_text id, struct id_entry *ret_entry,
                struct store_error *error)
{
    struct kv_bytes value = {0};
    int result = kv_get(view->txn, TABLE_IDS, kv_bytes_of(id.data, id.size), &value, error);
    if (result != STORE_OK) {
        return result;
    }
    struct codec_reader reader = {.data = value.data, .size = value.size};
    ret_entry->seq = codec_get_u64(&reader);
    ret_entry->withdrawn = codec_get_u8(&reader) != 0;
    return reader.failed ? (int)store_fail(error, STORE_CORRUPT, "the entry of an id is damaged")
                         : STORE_OK;
}

int items_find(struct store_view *view, struct store_text id, uint64_t *ret_seq,
               struct store_error *error)
{
    struct id_entry entry;
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
    memset(buffer, 0, sizeof *buffer);
}

static struct store_text get_text(struct codec_reader *reader)
{
    struct store_text text;
    text.data = codec_get_blob(reader, &text.size);
    return text;
}

/* Reads a list of numbers into the buffer, from `at` on; the caller has made room for all lists. */
static size_t get_numbers(struct codec_reader *reader, uint32_t *into, size_t room)
{
    size_t count = codec_get_u32(reader);
    if (count > room) {
        reader->failed = true;
        return 0;
    }
    for (size_t i = 0; i < count; i++) {
        into[i] = codec_get_u32(reader);
    }
    return count;
}

static int read_content(struct codec_reader *reader, struct item_buffer *buffer,
                        struct item_record *record, struct store_error *error)
{
    record->title = get_text(reader);
    record->text = get_text(reader);
    record->fields = get_text(reader);
    record->language = get_text(reader);
    /* What is left holds all numbers, four bytes each. */
    size_t room = (reader->size - reader->at) / sizeof(uint32_t);
    if (room > buffer->number_capacity) {
        uint32_t *grown = realloc(buffer->numbers, room * sizeof *grown);
        if (!grown) {
            return store_fail(error, STORE_NO_MEMORY, "out of memory");
        }
        buffer->numbers = grown;
        buffer->number_capacity = room;
    }
    uint32_t *next = buffer->numbers;
    record->tags = next;
    record->tag_count = get_numbers(reader, next, room);
    next += record->tag_count;
    room -= record->tag_count;
    record->prompted = next;
    record->prompted_count = get_numbers(reader, next, room);
    next += record->prompted_count;
    room -= record->prompted_count;
    record->declined = next;
    record->declined_count = get_numbers(reader, next, room);
    return STORE_OK;
}

static int decode(uint64_t seq, struct item_buffer *buffer, struct item_record *ret_record,
                  struct store_error *error)
{
    struct codec_reader reader = {.data = buffer->record.data, .size = buffer->record.size};
    struct item_record record = {.seq = seq};
    uint8_t kind = codec_get_u8(&reader);
    record.withdrawn = kind == RECORD_WITHDRAWAL;
    record.replaced = codec_get_u64(&reader);
    record.stored_at_ms = (int64_t)codec_get_u64(&reader);
    record.uid = codec_get_u32(&reader);
    record.id = get_text(&reader);
    if (kind == RECORD_FILING) {
        record.tagger = get_text(&reader);
        record.filed_at = get_text(&reader);
        struct store_text content = get_text(&reader);
        struct codec_reader inner = {.data = (const unsigned char *)content.data,
                                     .size = content.size};
        int result = read_content(&inner, buffer, &record, error);
        if (result != STORE_OK) {
            return result;
        }
        reader.failed = reader.failed || inner.failed;
    }
    if (reader.failed || (kind != RECORD_FILING && kind != RECORD_WITHDRAWAL)) {
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
    (void)get_text(&reader); /* id, tagger, filed_at: passed over */
    (void)get_text(&reader);
    (void)get_text(&reader);
    return get_text(&reader);
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
        struct id_entry entry;
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
