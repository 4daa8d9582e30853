#include "storage/vocabulary.h"

#include <string.h>

#include "storage/proof.h"
#include "storage/store_private.h"

enum {
    NUMBER_BYTES = 4
};

/* --- counts -------------------------------------------------------------------------------------
 */

void vocabulary_add(struct vocabulary_counts *counts, const struct vocabulary_counts *change)
{
    counts->count += change->count;
    counts->unprompted += change->unprompted;
    counts->unchecked += change->unchecked;
    counts->found += change->found;
    counts->ruled_belongs += change->ruled_belongs;
    counts->ruled_not += change->ruled_not;
    counts->check_true += change->check_true;
    counts->check_given += change->check_given;
    counts->second_true += change->second_true;
    counts->second_given += change->second_given;
}

static void put_counts(struct codec_writer *writer, const struct vocabulary_counts *counts)
{
    codec_put_u32(writer, counts->count);
    codec_put_u32(writer, counts->unprompted);
    codec_put_u32(writer, counts->unchecked);
    codec_put_u32(writer, counts->found);
    codec_put_u32(writer, counts->ruled_belongs);
    codec_put_u32(writer, counts->ruled_not);
    codec_put_u32(writer, counts->check_true);
    codec_put_u32(writer, counts->check_given);
    codec_put_u32(writer, counts->second_true);
    codec_put_u32(writer, counts->second_given);
}

static struct vocabulary_counts get_counts(struct codec_reader *reader)
{
    struct vocabulary_counts counts = {0};
    counts.count = codec_get_u32(reader);
    counts.unprompted = codec_get_u32(reader);
    counts.unchecked = codec_get_u32(reader);
    counts.found = codec_get_u32(reader);
    counts.ruled_belongs = codec_get_u32(reader);
    counts.ruled_not = codec_get_u32(reader);
    counts.check_true = codec_get_u32(reader);
    counts.check_given = codec_get_u32(reader);
    counts.second_true = codec_get_u32(reader);
    counts.second_given = codec_get_u32(reader);
    return counts;
}

/* --- the record of a tag -----------------------------------------------------------------------
 */

static int decode(uint32_t number, struct kv_bytes value, struct vocabulary_tag *ret_tag,
                  struct store_error *error)
{
    struct codec_reader reader = {.data = value.data, .size = value.size};
    struct vocabulary_tag tag = {.number = number};
    uint32_t checksum = codec_get_u32(&reader);
    tag.state = codec_get_u8(&reader) == VOCABULARY_RETIRED ? VOCABULARY_RETIRED : VOCABULARY_OPEN;
    tag.opened_seq = codec_get_u64(&reader);
    tag.counts = get_counts(&reader);
    size_t bytes = 0;
    const char *name = codec_get_blob(&reader, &bytes);
    if (reader.failed || bytes == 0 || bytes > VOCABULARY_NAME_BYTES ||
        codec_checksum((const unsigned char *)value.data + 4, value.size - 4) != checksum) {
        return store_fail(error, STORE_CORRUPT, "the record of tag number %u is damaged", number);
    }
    memcpy(tag.name, name, bytes);
    *ret_tag = tag;
    return STORE_OK;
}

int vocabulary_put(struct store_view *view, const struct vocabulary_tag *tag,
                   struct store_error *error)
{
    unsigned char body[64 + VOCABULARY_NAME_BYTES];
    unsigned char value[68 + VOCABULARY_NAME_BYTES];
    struct codec_writer inner = {.data = body, .capacity = sizeof body};
    codec_put_u8(&inner, (uint8_t)tag->state);
    codec_put_u64(&inner, tag->opened_seq);
    put_counts(&inner, &tag->counts);
    codec_put_blob(&inner, tag->name, strlen(tag->name));
    struct codec_writer outer = {.data = value, .capacity = sizeof value};
    codec_put_u32(&outer, codec_checksum(inner.data, inner.size));
    codec_put_raw(&outer, inner.data, inner.size);
    unsigned char key[4];
    codec_key_u32(key, tag->number);
    return kv_put(view->txn, TABLE_TAGS, kv_bytes_of(key, sizeof key),
                  kv_bytes_of(outer.data, outer.size), error);
}

/* The number that stands under a name. */
static int decode_number(struct kv_bytes name, struct kv_bytes value, uint32_t *ret_number,
                         struct store_error *error)
{
    if (!proof_holds(name, value, NUMBER_BYTES)) {
        return store_fail(error, STORE_CORRUPT, "the entry of the tag '%.*s' is damaged",
                          (int)name.size, (const char *)name.data);
    }
    *ret_number = codec_u32_of_key(value.data);
    return STORE_OK;
}

/* --- by name and by number ---------------------------------------------------------------------
 */

int vocabulary_get(struct store_view *view, uint32_t number, struct vocabulary_tag *ret_tag,
                   struct store_error *error)
{
    unsigned char key[4];
    codec_key_u32(key, number);
    struct kv_bytes value = {0};
    int result = kv_get(view->txn, TABLE_TAGS, kv_bytes_of(key, sizeof key), &value, error);
    return result == STORE_OK ? decode(number, value, ret_tag, error) : result;
}

int vocabulary_find(struct store_view *view, const char *name, size_t bytes,
                    struct vocabulary_tag *ret_tag, struct store_error *error)
{
    struct kv_bytes value = {0};
    struct kv_bytes key = kv_bytes_of(name, bytes);
    uint32_t number = 0;
    int result = kv_get(view->txn, TABLE_TAG_NAMES, key, &value, error);
    if (result == STORE_OK) {
        result = decode_number(key, value, &number, error);
    }
    if (result != STORE_OK) {
        return result;
    }
    result = vocabulary_get(view, number, ret_tag, error);
    if (result == STORE_NOT_FOUND) {
        return store_fail(error, STORE_CORRUPT, "a tag's name stands without its record");
    }
    return result;
}

int vocabulary_open(struct store_view *view, const char *name, size_t bytes, uint64_t opened_seq,
                    uint32_t *ret_number, struct store_error *error)
{
    if (bytes == 0 || bytes > VOCABULARY_NAME_BYTES) {
        return store_fail(error, STORE_REFUSED, "a tag has 1 to %d bytes", VOCABULARY_NAME_BYTES);
    }
    struct vocabulary_tag tag = {.number = (uint32_t)view->totals.tags, .opened_seq = opened_seq};
    memcpy(tag.name, name, bytes);
    unsigned char number[NUMBER_BYTES + PROOF_BYTES];
    struct codec_writer writer = {.data = number, .size = NUMBER_BYTES, .capacity = sizeof number};
    struct kv_bytes key = kv_bytes_of(name, bytes);
    codec_key_u32(number, tag.number);
    proof_put(&writer, key);
    int result = kv_put(view->txn, TABLE_TAG_NAMES, key, kv_bytes_of(number, sizeof number), error);
    if (result == STORE_OK) {
        result = vocabulary_put(view, &tag, error);
    }
    if (result == STORE_OK) {
        view->totals.tags++;
        *ret_number = tag.number;
    }
    return result;
}

/* --- walks -------------------------------------------------------------------------------------
 */

struct walk {
    struct store_view *view;
    int (*each)(void *user, const struct vocabulary_tag *tag);
    void *user;
    const char *after;
    size_t after_bytes;
    struct store_error *error;
};

static int visit_name(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    (void)at;
    struct walk *walk = user;
    if (key.size == walk->after_bytes && memcmp(key.data, walk->after, key.size) == 0) {
        return STORE_OK;
    }
    struct vocabulary_tag tag;
    uint32_t number = 0;
    int result = decode_number(key, value, &number, walk->error);
    if (result == STORE_OK) {
        result = vocabulary_get(walk->view, number, &tag, walk->error);
    }
    return result == STORE_OK ? walk->each(walk->user, &tag) : result;
}

int vocabulary_by_name(struct store_view *view, const char *after, size_t after_bytes,
                       int (*each)(void *user, const struct vocabulary_tag *tag), void *user,
                       struct store_error *error)
{
    struct walk walk = {.view = view,
                        .each = each,
                        .user = user,
                        .after = after,
                        .after_bytes = after_bytes,
                        .error = error};
    return kv_walk(view->txn, TABLE_TAG_NAMES, kv_bytes_of(after, after_bytes), visit_name, &walk,
                   error);
}

static int visit_number(void *user, struct kv_cursor *at, struct kv_bytes key,
                        struct kv_bytes value)
{
    (void)at;
    struct walk *walk = user;
    struct vocabulary_tag tag;
    int result = decode(codec_u32_of_key(key.data), value, &tag, walk->error);
    return result == STORE_OK ? walk->each(walk->user, &tag) : result;
}

int vocabulary_by_number(struct store_view *view,
                         int (*each)(void *user, const struct vocabulary_tag *tag), void *user,
                         struct store_error *error)
{
    struct walk walk = {.view = view, .each = each, .user = user, .error = error};
    return kv_walk(view->txn, TABLE_TAGS, kv_bytes_of(NULL, 0), visit_number, &walk, error);
}
