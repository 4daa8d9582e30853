#include "tests/integration/weights_checksum.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>

#include <cmocka.h>
#include <stdio.h>

#include "daemon/text/siphash.h"
#include "storage/codec.h"
#include "storage/kv.h"

enum {
    MAP_BYTES = 1 << 30,
    PATH_BYTES = 512
};

/* As model_store.c names them. */
static const char *const TABLES[] = {"words", "chunks", "tags"};

enum {
    TABLE_COUNT = sizeof TABLES / sizeof TABLES[0]
};

struct summing {
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

/* An empty table is no model. */
static void add_table(struct kv_txn *txn, unsigned table, struct summing *summing)
{
    struct store_error error = {0};
    uint64_t before = summing->sum;
    assert_int_equal(kv_walk(txn, table, (struct kv_bytes){0}, add, summing, &error), STORE_OK);
    assert_true(summing->sum != before);
}

uint64_t weights_checksum(const char *home)
{
    char directory[PATH_BYTES];
    struct store_error error = {0};
    struct kv *kv = NULL;
    struct kv_txn *txn = NULL;
    struct summing summing = {.sum = 0};
    int length = snprintf(directory, sizeof directory, "%s/model", home);
    assert_in_range(length, 1, sizeof directory - 1);
    const struct kv_settings settings = {.directory = directory,
                                         .map_bytes = MAP_BYTES,
                                         .tables = TABLES,
                                         .table_count = TABLE_COUNT};
    assert_int_equal(kv_open(&settings, &kv, &error), STORE_OK);
    assert_int_equal(kv_begin(kv, false, &txn, &error), STORE_OK);
    for (unsigned table = 0; table < TABLE_COUNT; table++) {
        add_table(txn, table, &summing);
    }
    kv_abort(txn);
    kv_close(kv);
    codec_deinit(&summing.record);
    return summing.sum;
}
