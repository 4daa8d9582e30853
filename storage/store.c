#include "storage/store.h"

#include <limits.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/random.h>

#include "storage/proof.h"
#include "storage/store_private.h"

static const char *const TABLE_NAMES[STORE_TABLES] = {
    [TABLE_META] = "meta",       [TABLE_IDS] = "ids",
    [TABLE_RECORDS] = "records", [TABLE_SUPERSEDED] = "superseded",
    [TABLE_TAGS] = "tags",       [TABLE_TAG_NAMES] = "tag_names",
};

static const char META_KEY[] = "store";

static struct kv_bytes meta_key(void)
{
    return kv_bytes_of(META_KEY, sizeof META_KEY - 1);
}

/* --- the record of format and totals -----------------------------------------------------------
 */

static void put_evidence(struct codec_writer *record, const struct store_evidence *evidence)
{
    codec_put_u64(record, evidence->checks_random);
    codec_put_u64(record, evidence->checks_picked);
    codec_put_u64(record, evidence->seen);
    codec_put_u64(record, evidence->wrong);
    codec_put_u64(record, evidence->second_items);
    codec_put_u64(record, evidence->second_first);
    codec_put_u64(record, evidence->second_second);
    codec_put_u64(record, evidence->second_both);
}

static void get_evidence(struct codec_reader *reader, struct store_evidence *evidence)
{
    evidence->checks_random = codec_get_u64(reader);
    evidence->checks_picked = codec_get_u64(reader);
    evidence->seen = codec_get_u64(reader);
    evidence->wrong = codec_get_u64(reader);
    evidence->second_items = codec_get_u64(reader);
    evidence->second_first = codec_get_u64(reader);
    evidence->second_second = codec_get_u64(reader);
    evidence->second_both = codec_get_u64(reader);
}

static int put_meta(struct store_view *view, struct store_error *error)
{
    struct codec_writer record = {0};
    codec_put_u32(&record, STORE_FORMAT);
    codec_put_raw(&record, view->store->uuid, STORE_UUID_BYTES);
    codec_put_u64(&record, view->totals.seq);
    codec_put_u64(&record, view->totals.items);
    codec_put_u64(&record, view->totals.tags);
    put_evidence(&record, &view->totals.evidence);
    proof_put(&record, meta_key());
    int result = record.failed ? (int)store_fail(error, STORE_NO_MEMORY, "out of memory")
                               : kv_put(view->txn, TABLE_META, meta_key(),
                                        kv_bytes_of(record.data, record.size), error);
    codec_deinit(&record);
    return result;
}

static int get_meta(struct store_view *view, unsigned char uuid[STORE_UUID_BYTES],
                    struct store_error *error)
{
    struct kv_bytes value = {0};
    int result = kv_get(view->txn, TABLE_META, meta_key(), &value, error);
    if (result != STORE_OK) {
        return result;
    }
    struct codec_reader reader = {.data = value.data, .size = value.size};
    uint32_t format = codec_get_u32(&reader);
    if (!reader.failed && format > STORE_FORMAT) {
        return store_fail(error, STORE_NEWER,
                          "the store was written by a newer version of undertag (format %u, this "
                          "version reads up to %d)",
                          format, STORE_FORMAT);
    }
    for (size_t i = 0; i < STORE_UUID_BYTES; i++) {
        uuid[i] = codec_get_u8(&reader);
    }
    view->totals.seq = codec_get_u64(&reader);
    view->totals.items = codec_get_u64(&reader);
    view->totals.tags = codec_get_u64(&reader);
    if (!reader.failed && format < STORE_FORMAT_OLDEST) {
        return store_fail(error, STORE_DENIED,
                          "the store has format %u, of an early version whose items cannot be "
                          "taken over: file them again into a new home",
                          format);
    }
    get_evidence(&reader, &view->totals.evidence);
    if (reader.failed || !proof_holds(meta_key(), value, reader.at)) {
        return store_fail(error, STORE_CORRUPT, "the store's first record is damaged");
    }
    return STORE_OK;
}

/* --- opening -----------------------------------------------------------------------------------
 */

static int make_uuid(unsigned char uuid[STORE_UUID_BYTES], struct store_error *error)
{
    if (getrandom(uuid, STORE_UUID_BYTES, 0) != STORE_UUID_BYTES) {
        return store_fail(error, STORE_DENIED, "the system gives no random bytes");
    }
    uuid[6] = (unsigned char)((uuid[6] & 0x0FU) | 0x40U); /* version 4 (RFC 9562) */
    uuid[8] = (unsigned char)((uuid[8] & 0x3FU) | 0x80U);
    return STORE_OK;
}

/* Gives a new store its first record, or reads that of an old one. */
static int begin_life(struct store *store, bool read_only, struct store_error *error)
{
    struct store_view view = {.store = store};
    int result = kv_begin(store->kv, false, &view.txn, error);
    if (result != STORE_OK) {
        return result;
    }
    result = get_meta(&view, store->uuid, error);
    kv_abort(view.txn);
    if (result != STORE_NOT_FOUND) {
        return result;
    }
    if (read_only) {
        return store_fail(error, STORE_CORRUPT, "the store's first record is gone");
    }
    result = make_uuid(store->uuid, error);
    if (result != STORE_OK) {
        return result;
    }
    result = kv_begin(store->kv, true, &view.txn, error);
    if (result != STORE_OK) {
        return result;
    }
    result = put_meta(&view, error);
    if (result != STORE_OK) {
        kv_abort(view.txn);
        return result;
    }
    return kv_commit(view.txn, error);
}

int store_open(const struct store_settings *settings, struct store **ret_store,
               struct store_error *error)
{
    char directory[PATH_MAX];
    int length = snprintf(directory, sizeof directory, "%s/store", settings->home);
    if (length < 0 || (size_t)length >= sizeof directory) {
        return store_fail(error, STORE_DENIED, "the path of the home is too long");
    }
    struct store *made = calloc(1, sizeof *made);
    if (!made) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    struct kv_settings kv_settings = {.directory = directory,
                                      .map_bytes = settings->map_bytes,
                                      .reserve_bytes = settings->reserve_bytes,
                                      .tables = TABLE_NAMES,
                                      .table_count = STORE_TABLES,
                                      .read_only = settings->read_only,
                                      .is_alone = settings->is_alone};
    int result = kv_open(&kv_settings, &made->kv, error);
    if (result == STORE_OK) {
        result = begin_life(made, settings->read_only, error);
    }
    if (result != STORE_OK) {
        store_close(made);
        return result;
    }
    *ret_store = made;
    return STORE_OK;
}

void store_close(struct store *store)
{
    if (store) {
        kv_close(store->kv);
        free(store);
    }
}

const unsigned char *store_uuid(const struct store *store)
{
    return store->uuid;
}

bool store_is_broken(const struct store *store)
{
    return kv_is_broken(store->kv);
}

uint64_t store_file_bytes(const struct store *store)
{
    return kv_file_bytes(store->kv);
}

int store_copy(struct store *store, kv_take take, void *user, struct store_error *error)
{
    return kv_copy(store->kv, take, user, error);
}

int store_copy_bytes(struct store *store, uint64_t *ret_bytes, struct store_error *error)
{
    return kv_copy_bytes(store->kv, ret_bytes, error);
}

int store_check_pages(struct store *store, kv_tell tell, void *user, struct store_error *error)
{
    return kv_check_pages(store->kv, tell, user, error);
}

/* --- views -------------------------------------------------------------------------------------
 */

static int begin_view(struct store *store, bool write, struct store_view **ret_view,
                      struct store_error *error)
{
    struct store_view *made = calloc(1, sizeof *made);
    if (!made) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    made->store = store;
    made->write = write;
    int result = kv_begin(store->kv, write, &made->txn, error);
    if (result == STORE_OK) {
        unsigned char uuid[STORE_UUID_BYTES];
        result = get_meta(made, uuid, error);
    }
    if (result != STORE_OK) {
        store_end(made);
        return result == STORE_NOT_FOUND
                   ? (int)store_fail(error, STORE_CORRUPT, "the store's first record is gone")
                   : result;
    }
    *ret_view = made;
    return STORE_OK;
}

int store_read(struct store *store, struct store_view **ret_view, struct store_error *error)
{
    return begin_view(store, false, ret_view, error);
}

int store_write(struct store *store, struct store_view **ret_view, struct store_error *error)
{
    return begin_view(store, true, ret_view, error);
}

int store_commit(struct store_view *view, struct store_error *error)
{
    int result = put_meta(view, error);
    if (result != STORE_OK) {
        store_end(view);
        return result;
    }
    result = kv_commit(view->txn, error);
    free(view);
    return result;
}

void store_end(struct store_view *view)
{
    if (view) {
        kv_abort(view->txn);
        free(view);
    }
}

struct store_totals store_view_totals(const struct store_view *view)
{
    return view->totals;
}

/* --- erasing -----------------------------------------------------------------------------------
 */

enum {
    ERASE_BATCH = 256
};

/* The first superseded entries up to a seq, copied out so that the walk is over before erasing. */
struct passed {
    uint64_t learned;
    size_t most;
    size_t count;
    uint64_t successors[ERASE_BATCH];
    uint64_t replaced[ERASE_BATCH];
    struct store_error *error;
};

static int collect_passed(void *user, struct kv_cursor *at, struct kv_bytes key,
                          struct kv_bytes value)
{
    (void)at;
    struct passed *passed = user;
    uint64_t successor = codec_u64_of_key(key.data);
    if (successor > passed->learned || passed->count == passed->most) {
        return STORE_STOPPED;
    }
    if (!proof_holds(key, value, sizeof(uint64_t))) {
        /* What comes before it is erased; it is told when nothing does. */
        return passed->count > 0 ? STORE_STOPPED
                                 : (int)store_fail(passed->error, STORE_CORRUPT,
                                                   "what change %llu replaced is damaged",
                                                   (unsigned long long)successor);
    }
    passed->successors[passed->count] = successor;
    passed->replaced[passed->count] = codec_u64_of_key(value.data);
    passed->count++;
    return STORE_OK;
}

int store_erase_passed(struct store_view *view, uint64_t learned, size_t most, size_t *ret_erased,
                       struct store_error *error)
{
    struct passed passed = {
        .learned = learned, .most = most < ERASE_BATCH ? most : ERASE_BATCH, .error = error};
    int result =
        kv_walk(view->txn, TABLE_SUPERSEDED, kv_bytes_of(NULL, 0), collect_passed, &passed, error);
    if (result != STORE_OK && result != STORE_STOPPED) {
        return result;
    }
    for (size_t i = 0; i < passed.count; i++) {
        unsigned char key[8];
        codec_key_u64(key, passed.successors[i]);
        result = records_erase(view, passed.replaced[i], error);
        if (result == STORE_OK) {
            result = kv_delete(view->txn, TABLE_SUPERSEDED, kv_bytes_of(key, sizeof key), error);
        }
        if (result != STORE_OK) {
            return result;
        }
    }
    *ret_erased = passed.count;
    return STORE_OK;
}

int store_scrub(struct store *store, size_t most_pages, size_t *ret_left, struct store_error *error)
{
    return kv_scrub(store->kv, most_pages, ret_left, error);
}
