#include "tests/integration/weights_checksum.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>

#include <cmocka.h>
#include <stdio.h>

#include "daemon/text/siphash.h"
#include "storage/codec.h"
#include "storage/kv.h"
#include "storage/model_store_private.h"

enum {
    MAP_BYTES = 1 << 30,
    PATH_BYTES = 512
};

/* As model_store.c names them. */
static const char *const TABLES[] = {"meta",    "words",    "chunks", "tags",
                                     "figures", "worklist", "counts", "news"};

/* What is the same whenever it was stored; of chunks, that is what they are with their news. */
static const enum model_table SUMMED[] = {MODEL_WORDS, MODEL_COUNTS, MODEL_TAGS};

struct summing {
    struct kv_txn *txn;
    uint64_t sum;
    struct codec_writer record;
};

/*
 * The sum so far, the key and the value. Not by codec_checksum: stored values begin with that of
 * what follows it, and one CRC over another may cancel out.
 */
static int add(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    static const struct siphash_key fixed = {1, 2};
    struct summing *summing = user;
    (void)at;
    codec_reset(&summing->record);
    codec_put_u64(&summing->record, summing->sum);
    codec_put_blob(&summing->record, key.data, key.size);
    codec_put_blob(&summing->record, value.data, value.size);
    assert_false(summing->record.failed);
    summing->sum = siphash(&fixed, summing->record.data, summing->record.size);
    return 0;
}

static int add_chunk(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    unsigned char room[KV_VALUE_BYTES];
    const struct summing *summing = user;
    struct store_error error = {0};
    struct kv_bytes news = {0};
    struct kv_bytes body = {0};
    int code = kv_get(summing->txn, MODEL_NEWS, key, &news, &error);
    assert_true(code == STORE_OK || code == STORE_NOT_FOUND);
    assert_true(model_chunks_open(key, value, news, room, &body));
    return add(user, at, key, body);
}

/* An empty table is no model. */
static void add_table(struct summing *summing, enum model_table table, kv_each each)
{
    struct store_error error = {0};
    uint64_t before = summing->sum;
    assert_int_equal(kv_walk(summing->txn, table, (struct kv_bytes){0}, each, summing, &error),
                     STORE_OK);
    assert_true(summing->sum != before);
}

uint64_t weights_checksum(const char *home)
{
    char directory[PATH_BYTES];
    struct store_error error = {0};
    struct kv *kv = NULL;
    struct summing summing = {.sum = 0};
    int length = snprintf(directory, sizeof directory, "%s/model", home);
    assert_in_range(length, 1, sizeof directory - 1);
    const struct kv_settings settings = {.directory = directory,
                                         .map_bytes = MAP_BYTES,
                                         .tables = TABLES,
                                         .table_count = MODEL_TABLES};
    assert_int_equal(kv_open(&settings, &kv, &error), STORE_OK);
    assert_int_equal(kv_begin(kv, false, &summing.txn, &error), STORE_OK);
    for (size_t i = 0; i < sizeof SUMMED / sizeof SUMMED[0]; i++) {
        add_table(&summing, SUMMED[i], add);
    }
    add_table(&summing, MODEL_CHUNKS, add_chunk);
    kv_abort(summing.txn);
    kv_close(kv);
    codec_deinit(&summing.record);
    return summing.sum;
}
