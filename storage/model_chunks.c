#include "storage/model_chunks.h"

#include <stdlib.h>
#include <string.h>

#include "storage/codec.h"
#include "storage/difference.h"
#include "storage/model_store_private.h"

enum {
    CHECKSUM_BYTES = 4,
    SETTLED_MOST = 512 /* news settled at a time */
};

static struct kv_bytes body_of(struct kv_bytes record)
{
    return kv_bytes_of((const unsigned char *)record.data + CHECKSUM_BYTES,
                       record.size - CHECKSUM_BYTES);
}

static int fail_damaged(struct store_error *error)
{
    return store_fail(error, STORE_CORRUPT, "a stored chunk of the model is damaged");
}

bool model_chunks_open(struct kv_bytes key, struct kv_bytes record, struct kv_bytes news,
                       unsigned char *room, struct kv_bytes *ret_body)
{
    const struct kv_bytes proof = news.data ? news : record;
    if (record.size < CHECKSUM_BYTES || proof.size < CHECKSUM_BYTES) {
        return false;
    }
    struct kv_bytes body = body_of(record);
    if (news.data) {
        size_t size = 0;
        if (!difference_apply(body, body_of(news), room, KV_VALUE_BYTES, &size)) {
            return false;
        }
        body = kv_bytes_of(room, size);
    }
    struct codec_reader reader = {.data = proof.data, .size = proof.size};
    if (codec_get_u32(&reader) != codec_checksum_of_two(key.data, key.size, body.data, body.size)) {
        return false;
    }
    *ret_body = body;
    return true;
}

/* --- writing ------------------------------------------------------------------------------------
 */

static int put_whole(struct kv_txn *txn, struct kv_bytes key, uint32_t checksum,
                     struct kv_bytes body, struct store_error *error)
{
    unsigned char record[KV_VALUE_BYTES];
    if (body.size > sizeof record - CHECKSUM_BYTES) {
        return store_fail(error, STORE_BROKEN, "a chunk of %zu bytes is too large", body.size);
    }
    struct codec_writer writer = {.data = record, .capacity = sizeof record};
    codec_put_u32(&writer, checksum);
    codec_put_raw(&writer, body.data, body.size);
    int code = kv_put(txn, MODEL_CHUNKS, key, kv_bytes_of(record, writer.size), error);
    if (code == STORE_OK) {
        code = kv_take_out(txn, MODEL_NEWS, key, error);
    }
    return code == STORE_NOT_FOUND ? STORE_OK : code;
}

int model_chunks_are_many(struct kv_txn *txn, uint64_t count, bool *ret_many,
                          struct store_error *error)
{
    uint64_t all = 0;
    int code = kv_count(txn, MODEL_CHUNKS, &all, error);
    if (code == STORE_OK) {
        *ret_many = count > all / MODEL_CHUNKS_MANY_PART;
    }
    return code;
}

/* Puts the news of a chunk that has been stored; *ret_put says whether there is one, and its news
 * take less than the whole: others only put off what is not spared. */
static int put_news(struct kv_txn *txn, struct kv_bytes key, uint32_t checksum,
                    struct kv_bytes body, bool *ret_put, struct store_error *error)
{
    unsigned char news[KV_VALUE_BYTES];
    struct kv_bytes before = {0};
    size_t size = 0;
    size_t room = sizeof news - CHECKSUM_BYTES;
    int code = kv_get(txn, MODEL_CHUNKS, key, &before, error);
    *ret_put = code == STORE_OK && before.size >= CHECKSUM_BYTES &&
               difference_make(body_of(before), body, news + CHECKSUM_BYTES,
                               body.size < room ? body.size : room, &size);
    if (!*ret_put) {
        return code == STORE_NOT_FOUND ? STORE_OK : code;
    }
    struct codec_writer writer = {.data = news, .capacity = CHECKSUM_BYTES};
    codec_put_u32(&writer, checksum);
    return kv_put(txn, MODEL_NEWS, key, kv_bytes_of(news, CHECKSUM_BYTES + size), error);
}

int model_chunks_put(struct kv_txn *txn, struct kv_bytes key, struct kv_bytes body, bool is_whole,
                     struct store_error *error)
{
    uint32_t checksum = codec_checksum_of_two(key.data, key.size, body.data, body.size);
    bool is_put = false;
    int code = is_whole ? STORE_OK : put_news(txn, key, checksum, body, &is_put, error);
    return code != STORE_OK || is_put ? code : put_whole(txn, key, checksum, body, error);
}

/* --- settling -----------------------------------------------------------------------------------
 */

/* Keys of news that are to be settled. */
struct stretch {
    unsigned char (*keys)[MODEL_CHUNKS_KEY];
    size_t count;
    size_t most;
};

static int add_key(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    struct stretch *stretch = user;
    (void)at;
    (void)value;
    if (stretch->count == stretch->most || key.size != MODEL_CHUNKS_KEY) {
        return STORE_STOPPED;
    }
    memcpy(stretch->keys[stretch->count++], key.data, key.size);
    return STORE_OK;
}

static int settle_one(struct kv_txn *txn, struct kv_bytes key, struct store_error *error)
{
    unsigned char room[KV_VALUE_BYTES];
    struct kv_bytes before = {0};
    struct kv_bytes news = {0};
    struct kv_bytes body = {0};
    int code = kv_get(txn, MODEL_NEWS, key, &news, error);
    if (code == STORE_OK) {
        code = kv_get(txn, MODEL_CHUNKS, key, &before, error);
    }
    if (code != STORE_OK && code != STORE_NOT_FOUND) {
        return code;
    }
    if (code == STORE_NOT_FOUND || !model_chunks_open(key, before, news, room, &body)) {
        return fail_damaged(error);
    }
    struct codec_reader reader = {.data = news.data, .size = news.size};
    return put_whole(txn, key, codec_get_u32(&reader), body, error);
}

/* Settles the next few, and begins anew behind the last. */
static int settle_some(struct kv_txn *txn, struct model_chunks_settled *settled,
                       struct stretch *stretch, struct store_error *error)
{
    stretch->count = 0;
    int code = kv_walk(txn, MODEL_NEWS, kv_bytes_of(settled->next, sizeof settled->next), add_key,
                       stretch, error);
    if (code != STORE_OK && code != STORE_STOPPED) {
        return code;
    }
    code = STORE_OK;
    for (size_t i = 0; i < stretch->count && code == STORE_OK; i++) {
        code = settle_one(txn, kv_bytes_of(stretch->keys[i], MODEL_CHUNKS_KEY), error);
    }
    if (stretch->count < stretch->most) {
        memset(settled->next, 0, sizeof settled->next);
    } else {
        memcpy(settled->next, stretch->keys[stretch->count - 1], sizeof settled->next);
    }
    return code;
}

static int is_due(struct kv_txn *txn, bool *ret_due, struct store_error *error)
{
    uint64_t chunk_pages = 0;
    uint64_t news_pages = 0;
    int code = kv_count_pages(txn, MODEL_CHUNKS, &chunk_pages, error);
    if (code == STORE_OK) {
        code = kv_count_pages(txn, MODEL_NEWS, &news_pages, error);
    }
    *ret_due =
        news_pages > MODEL_CHUNKS_LEAST_NEWS && news_pages > chunk_pages / MODEL_CHUNKS_NEWS_PART;
    return code;
}

int model_chunks_settle(struct kv_txn *txn, struct model_chunks_settled *settled,
                        struct store_error *error)
{
    struct stretch stretch = {.keys = calloc(SETTLED_MOST, sizeof *stretch.keys),
                              .most = SETTLED_MOST};
    bool due = false;
    if (!stretch.keys) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    int code = is_due(txn, &due, error);
    while (code == STORE_OK && due) {
        code = settle_some(txn, settled, &stretch, error);
        if (code == STORE_OK) {
            code = is_due(txn, &due, error);
        }
    }
    free(stretch.keys);
    return code;
}

/* --- reading ------------------------------------------------------------------------------------
 */

void model_chunks_deinit(struct model_chunks_reader *reader)
{
    kv_cursor_close(reader->chunks);
    kv_cursor_close(reader->news);
    reader->chunks = NULL;
    reader->news = NULL;
}

static int find_record(struct model_chunks_reader *reader, struct kv_bytes wanted, bool is_next,
                       struct kv_bytes *ret_record, struct store_error *error)
{
    struct kv_bytes key = {0};
    int code = is_next ? kv_next(reader->chunks, &key, ret_record, error)
                       : kv_seek(reader->chunks, wanted, &key, ret_record, error);
    if (code == STORE_OK &&
        (key.size != wanted.size || memcmp(key.data, wanted.data, key.size) != 0)) {
        return STORE_NOT_FOUND;
    }
    return code;
}

static int compare_keys(struct kv_bytes left, struct kv_bytes right)
{
    return left.size == right.size ? memcmp(left.data, right.data, left.size)
                                   : (left.size > right.size) - (left.size < right.size);
}

/* The news of a chunk; no data where there are none. */
static int find_news(struct model_chunks_reader *reader, struct kv_bytes wanted, bool is_next,
                     struct kv_bytes *ret_news, struct store_error *error)
{
    int code = STORE_OK;
    bool is_behind = reader->news_key.data && compare_keys(reader->news_key, wanted) < 0;
    if (!is_next) {
        code = kv_seek(reader->news, wanted, &reader->news_key, &reader->news_value, error);
    } else if (is_behind) {
        code = kv_next(reader->news, &reader->news_key, &reader->news_value, error);
    }
    if (code == STORE_NOT_FOUND) {
        reader->news_key = (struct kv_bytes){0};
        code = STORE_OK;
    }
    bool is_there =
        code == STORE_OK && reader->news_key.data && compare_keys(reader->news_key, wanted) == 0;
    *ret_news = is_there ? reader->news_value : (struct kv_bytes){0};
    return code;
}

static int open_cursors(struct model_chunks_reader *reader, struct kv_txn *txn,
                        struct store_error *error)
{
    int code =
        reader->chunks ? STORE_OK : kv_cursor_open(txn, MODEL_CHUNKS, &reader->chunks, error);
    return code != STORE_OK || reader->news ? code
                                            : kv_cursor_open(txn, MODEL_NEWS, &reader->news, error);
}

int model_chunks_read(struct model_chunks_reader *reader, struct kv_txn *txn, uint32_t word,
                      uint32_t number, struct kv_bytes *ret_body, struct store_error *error)
{
    unsigned char bytes[MODEL_CHUNKS_KEY];
    codec_key_u32(bytes, word);
    codec_key_u32(bytes + 4, number);
    struct kv_bytes key = kv_bytes_of(bytes, sizeof bytes);
    struct kv_bytes record = {0};
    struct kv_bytes news = {0};
    bool is_next = reader->is_at_chunk && reader->word == word && reader->number + 1 == number;
    reader->is_at_chunk = false;
    int code = open_cursors(reader, txn, error);
    if (code == STORE_OK) {
        code = find_record(reader, key, is_next, &record, error);
    }
    if (code == STORE_OK) {
        code = find_news(reader, key, is_next, &news, error);
    }
    if (code != STORE_OK) {
        return code;
    }
    reader->is_at_chunk = true;
    reader->word = word;
    reader->number = number;
    return model_chunks_open(key, record, news, reader->room, ret_body) ? STORE_OK
                                                                        : fail_damaged(error);
}
