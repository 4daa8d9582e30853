/*
 * The evidence of a record:
 *   change u8 · filed_seq u64 · filed_stored_at u64 · filed_after_check u8
 *   rulings: count u32, then tag u32 · belongs u8 · at u64 · editor blob each
 *   check: 0, 1 (picked) or 2 (random) u8, and unless 0: at u64 · checker blob · vocabulary u32 ·
 *     seen u32 · the numbers of tags, given, hidden, extra
 *   seconds: count u32, then tagger blob · filed_at blob · at u64 · numbers of tags each
 *   users: u32 each of the filing, the check (where there is one), the rulings, the seconds
 * The users came with format 3: a record that ends before them does not say.
 */
#include <stdlib.h>

#include "storage/items_private.h"

enum check_kind {
    CHECK_NONE = 0,
    CHECK_PICKED = 1,
    CHECK_RANDOM = 2
};

/* --- into a record ------------------------------------------------------------------------------
 */

static bool has_evidence(const struct item_record *record)
{
    return record->change != ITEM_FILED || record->ruling_count > 0 || record->check.is_there ||
           record->second_count > 0;
}

static void put_check(struct codec_writer *writer, const struct item_check *check)
{
    if (!check->is_there) {
        codec_put_u8(writer, CHECK_NONE);
        return;
    }
    codec_put_u8(writer, check->is_random ? CHECK_RANDOM : CHECK_PICKED);
    codec_put_u64(writer, (uint64_t)check->at_ms);
    item_put_text(writer, check->checker);
    codec_put_u32(writer, check->vocabulary);
    codec_put_u32(writer, check->seen);
    item_put_numbers(writer, check->tags);
    item_put_numbers(writer, check->given);
    item_put_numbers(writer, check->hidden);
    item_put_numbers(writer, check->extra);
}

static void put_users(struct codec_writer *writer, const struct item_record *record)
{
    codec_put_u32(writer, record->filed_uid);
    if (record->check.is_there) {
        codec_put_u32(writer, record->check.uid);
    }
    for (size_t i = 0; i < record->ruling_count; i++) {
        codec_put_u32(writer, record->rulings[i].uid);
    }
    for (size_t i = 0; i < record->second_count; i++) {
        codec_put_u32(writer, record->seconds[i].uid);
    }
}

void item_evidence_put(struct codec_writer *writer, const struct item_record *record)
{
    if (!has_evidence(record)) {
        return;
    }
    codec_put_u8(writer, (uint8_t)record->change);
    codec_put_u64(writer, record->filed_seq);
    codec_put_u64(writer, (uint64_t)record->filed_stored_at_ms);
    codec_put_u8(writer, record->filed_after_check ? 1 : 0);
    codec_put_u32(writer, (uint32_t)record->ruling_count);
    for (size_t i = 0; i < record->ruling_count; i++) {
        const struct item_ruling *ruling = &record->rulings[i];
        codec_put_u32(writer, ruling->tag);
        codec_put_u8(writer, ruling->belongs ? 1 : 0);
        codec_put_u64(writer, (uint64_t)ruling->at_ms);
        item_put_text(writer, ruling->editor);
    }
    put_check(writer, &record->check);
    codec_put_u32(writer, (uint32_t)record->second_count);
    for (size_t i = 0; i < record->second_count; i++) {
        const struct item_second *second = &record->seconds[i];
        item_put_text(writer, second->tagger);
        item_put_text(writer, second->filed_at);
        codec_put_u64(writer, (uint64_t)second->at_ms);
        item_put_numbers(writer, second->tags);
    }
    put_users(writer, record);
}

/* --- out of a record ----------------------------------------------------------------------------
 */

/* The length of a list whose entries take at least `least_bytes` each. */
static size_t get_length(struct codec_reader *reader, size_t least_bytes)
{
    size_t count = codec_get_u32(reader);
    if (count > (reader->size - reader->at) / least_bytes) {
        reader->failed = true;
        return 0;
    }
    return count;
}

static int get_rulings(struct codec_reader *reader, struct item_buffer *buffer,
                       struct item_record *record, struct store_error *error)
{
    enum {
        LEAST_BYTES = 17
    };
    size_t count = get_length(reader, LEAST_BYTES);
    if (count > buffer->ruling_capacity) {
        struct item_ruling *grown = realloc(buffer->rulings, count * sizeof *grown);
        if (!grown) {
            return items_no_memory(error);
        }
        buffer->rulings = grown;
        buffer->ruling_capacity = count;
    }
    for (size_t i = 0; i < count; i++) {
        struct item_ruling *ruling = &buffer->rulings[i];
        ruling->tag = codec_get_u32(reader);
        ruling->belongs = codec_get_u8(reader) != 0;
        ruling->at_ms = (int64_t)codec_get_u64(reader);
        ruling->editor = item_get_text(reader);
    }
    record->rulings = buffer->rulings;
    record->ruling_count = count;
    return STORE_OK;
}

static void get_check(struct codec_reader *reader, struct item_buffer *buffer, size_t *used,
                      struct item_check *check)
{
    uint8_t kind = codec_get_u8(reader);
    if (kind == CHECK_NONE) {
        return;
    }
    check->is_there = true;
    check->is_random = kind == CHECK_RANDOM;
    check->at_ms = (int64_t)codec_get_u64(reader);
    check->checker = item_get_text(reader);
    check->vocabulary = codec_get_u32(reader);
    check->seen = codec_get_u32(reader);
    check->tags = item_get_numbers(reader, buffer, used);
    check->given = item_get_numbers(reader, buffer, used);
    check->hidden = item_get_numbers(reader, buffer, used);
    check->extra = item_get_numbers(reader, buffer, used);
}

static int get_seconds(struct codec_reader *reader, struct item_buffer *buffer, size_t *used,
                       struct item_record *record, struct store_error *error)
{
    enum {
        LEAST_BYTES = 20
    };
    size_t count = get_length(reader, LEAST_BYTES);
    if (count > buffer->second_capacity) {
        struct item_second *grown = realloc(buffer->seconds, count * sizeof *grown);
        if (!grown) {
            return items_no_memory(error);
        }
        buffer->seconds = grown;
        buffer->second_capacity = count;
    }
    for (size_t i = 0; i < count; i++) {
        struct item_second *second = &buffer->seconds[i];
        second->tagger = item_get_text(reader);
        second->filed_at = item_get_text(reader);
        second->at_ms = (int64_t)codec_get_u64(reader);
        second->tags = item_get_numbers(reader, buffer, used);
    }
    record->seconds = buffer->seconds;
    record->second_count = count;
    return STORE_OK;
}

/* Nobody where the record was written before users were noted. */
static void get_users(struct codec_reader *reader, struct item_buffer *buffer,
                      struct item_record *record)
{
    bool is_noted = reader->at < reader->size;
    record->filed_uid = is_noted ? codec_get_u32(reader) : ITEM_NO_UID;
    if (record->check.is_there) {
        record->check.uid = is_noted ? codec_get_u32(reader) : ITEM_NO_UID;
    }
    for (size_t i = 0; i < record->ruling_count; i++) {
        buffer->rulings[i].uid = is_noted ? codec_get_u32(reader) : ITEM_NO_UID;
    }
    for (size_t i = 0; i < record->second_count; i++) {
        buffer->seconds[i].uid = is_noted ? codec_get_u32(reader) : ITEM_NO_UID;
    }
}

int item_evidence_get(struct codec_reader *reader, struct item_buffer *buffer, size_t used,
                      struct item_record *record, struct store_error *error)
{
    record->change = ITEM_FILED;
    record->filed_seq = record->seq;
    record->filed_stored_at_ms = record->stored_at_ms;
    record->filed_uid = record->uid;
    if (reader->at < reader->size) {
        record->change = (enum item_change)codec_get_u8(reader);
        uint64_t filed_seq = codec_get_u64(reader);
        record->filed_seq = filed_seq > 0 ? filed_seq : record->seq;
        record->filed_stored_at_ms = (int64_t)codec_get_u64(reader);
        record->filed_after_check = codec_get_u8(reader) != 0;
        int result = get_rulings(reader, buffer, record, error);
        if (result != STORE_OK) {
            return result;
        }
        get_check(reader, buffer, &used, &record->check);
        result = get_seconds(reader, buffer, &used, record, error);
        if (result != STORE_OK) {
            return result;
        }
        get_users(reader, buffer, record);
        reader->failed = reader->failed || record->change >= ITEM_WITHDRAWN;
    }
    if (!reader->failed) {
        item_evidence_follow(record, buffer->numbers + used);
    }
    return STORE_OK;
}

/* --- what follows -------------------------------------------------------------------------------
 */

enum {
    LISTS_THAT_FOLLOW = 11 /* none longer than all that is stored */
};

size_t item_evidence_room(size_t stored_numbers)
{
    return (1 + LISTS_THAT_FOLLOW) * stored_numbers;
}

static struct numbers ruled(const struct item_record *record, bool belongs, uint32_t **room)
{
    uint32_t *list = *room;
    size_t count = 0;
    for (size_t i = 0; i < record->ruling_count; i++) {
        if (record->rulings[i].belongs == belongs) {
            list[count++] = record->rulings[i].tag;
        }
    }
    *room += count;
    return (struct numbers){.list = list, .count = count};
}

/* Each set operation takes the room that its result needs. */
static struct numbers take(struct numbers made, uint32_t **room)
{
    *room += made.count;
    return made;
}

void item_evidence_follow(struct item_record *record, uint32_t *room)
{
    record->belongs = ruled(record, true, &room);
    record->denied = ruled(record, false, &room);
    struct numbers base = record->filed;
    if (record->check.is_there) {
        base = record->check.tags;
        if (record->filed_after_check) {
            base = take(numbers_unite(base, record->filed, room), &room);
            base = take(numbers_without(base, record->declined, room), &room);
        }
    }
    struct numbers with = take(numbers_unite(base, record->belongs, room), &room);
    record->tags = take(numbers_without(with, record->denied, room), &room);
    struct numbers given = take(numbers_without(record->filed, record->prompted, room), &room);
    record->unprompted = take(numbers_common(given, record->tags, room), &room);
    record->examined = take(numbers_without(record->tags, record->unprompted, room), &room);
    struct numbers turned_down = take(numbers_unite(record->declined, record->denied, room), &room);
    record->known_not = take(numbers_without(turned_down, record->tags, room), &room);
}
