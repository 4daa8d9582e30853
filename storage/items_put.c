/*
 * The steps that every change of an item has in common: finding what stands under its id, putting a
 * record under the next seq in its place, and moving the counts.
 */
#include <stdlib.h>

#include "storage/items_private.h"
#include "storage/proof.h"
#include "storage/store_private.h"

/* --- into a record ------------------------------------------------------------------------------
 */

void item_put_text(struct codec_writer *writer, struct store_text text)
{
    codec_put_blob(writer, text.data, text.size);
}

void item_put_numbers(struct codec_writer *writer, struct numbers numbers)
{
    codec_put_u32(writer, (uint32_t)numbers.count);
    for (size_t i = 0; i < numbers.count; i++) {
        codec_put_u32(writer, numbers.list[i]);
    }
}

static void encode(struct codec_writer *writer, const struct item_record *record,
                   struct store_text content)
{
    bool is_item = !item_is_withdrawn(record);
    codec_reset(writer);
    codec_put_u8(writer, is_item ? RECORD_ITEM : RECORD_WITHDRAWAL);
    codec_put_u64(writer, record->replaced);
    codec_put_u64(writer, (uint64_t)record->stored_at_ms);
    codec_put_u32(writer, record->uid);
    item_put_text(writer, record->id);
    if (is_item) {
        item_put_text(writer, record->tagger);
        item_put_text(writer, record->filed_at);
        item_put_text(writer, content);
        item_evidence_put(writer, record);
    }
}

/* --- into the store -----------------------------------------------------------------------------
 */

static int put_id(struct store_view *view, struct store_text id, struct id_entry entry,
                  struct store_error *error)
{
    unsigned char value[ID_ENTRY_BYTES + PROOF_BYTES];
    struct codec_writer writer = {.data = value, .capacity = sizeof value};
    struct kv_bytes key = kv_bytes_of(id.data, id.size);
    codec_put_u64(&writer, entry.seq);
    codec_put_u8(&writer, entry.withdrawn ? 1 : 0);
    proof_put(&writer, key);
    return kv_put(view->txn, TABLE_IDS, key, kv_bytes_of(value, sizeof value), error);
}

static int put_superseded(struct store_view *view, uint64_t seq, uint64_t replaced,
                          struct store_error *error)
{
    unsigned char key[8];
    unsigned char value[8 + PROOF_BYTES];
    struct codec_writer writer = {.data = value, .size = 8, .capacity = sizeof value};
    codec_key_u64(key, seq);
    codec_key_u64(value, replaced);
    proof_put(&writer, kv_bytes_of(key, sizeof key));
    return kv_append(view->txn, TABLE_SUPERSEDED, kv_bytes_of(key, sizeof key),
                     kv_bytes_of(value, sizeof value), error);
}

int items_standing(struct store_view *view, struct store_text id, struct standing_item *standing,
                   struct store_error *error)
{
    int result = items_entry(view, id, &standing->entry, error);
    if (result == STORE_NOT_FOUND) {
        return STORE_OK;
    }
    if (result == STORE_OK && !standing->entry.withdrawn) {
        result = items_read(view, standing->entry.seq, &standing->buffer, &standing->record, error);
    }
    return result;
}

static size_t count_stored(const struct item_record *record)
{
    return record->filed.count + record->declined.count + record->ruling_count +
           record->check.tags.count;
}

static int put_record(struct store_view *view, const struct standing_item *standing,
                      struct item_record *record, struct store_text content,
                      struct codec_writer *buffer, struct store_error *error)
{
    bool is_item = !item_is_withdrawn(record);
    record->seq = view->totals.seq + 1;
    record->replaced = standing->entry.seq;
    if (record->change == ITEM_FILED) {
        record->filed_seq = record->seq;
        record->filed_stored_at_ms = record->stored_at_ms;
        record->filed_uid = record->uid;
    }
    encode(buffer, record, content);
    if (buffer->failed) {
        return items_no_memory(error);
    }
    int result = records_put(view, record->seq, buffer, error);
    if (result == STORE_OK) {
        result = put_id(view, record->id,
                        (struct id_entry){.seq = record->seq, .withdrawn = !is_item}, error);
    }
    if (result == STORE_OK && record->replaced != 0) {
        result = put_superseded(view, record->seq, record->replaced, error);
    }
    if (result == STORE_OK) {
        view->totals.seq = record->seq;
        result = item_tally_move(view, item_stands(standing) ? &standing->record : NULL,
                                 is_item ? record : NULL, error);
    }
    return result;
}

int items_put(struct store_view *view, const struct standing_item *standing,
              struct item_record *record, struct store_text content, struct codec_writer *buffer,
              struct store_error *error)
{
    uint32_t *room = calloc(item_evidence_room(count_stored(record)) + 1, sizeof *room);
    if (!room) {
        return items_no_memory(error);
    }
    item_evidence_follow(record, room);
    int result = put_record(view, standing, record, content, buffer, error);
    free(room);
    return result;
}
