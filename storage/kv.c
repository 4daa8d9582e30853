#include "storage/kv.h"

#include <endian.h>
#include <errno.h>
#include <lmdb.h>
#include <pthread.h>
#include <stdatomic.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sys/statvfs.h>
#include <unistd.h>

enum {
    MOST_READERS = 126
};

struct kv {
    MDB_env *env;
    char *directory;
    size_t reserve_bytes;
    unsigned table_count;
    MDB_dbi tables[KV_TABLES];
    atomic_bool broken; /* a commit failed in a way that leaves the file in doubt */
};

struct kv_txn {
    struct kv *kv;
    MDB_txn *txn;
    bool write;
};

struct kv_cursor {
    MDB_cursor *cursor;
};

/* Translates an LMDB code, once, here. */
static int translate(const struct kv *kv, int code, const char *doing, struct store_error *error)
{
    switch (code) {
    case MDB_SUCCESS:
        return STORE_OK;
    case MDB_NOTFOUND:
        return STORE_NOT_FOUND;
    case ENOMEM:
        return store_fail(error, STORE_NO_MEMORY, "out of memory while %s", doing);
    case MDB_MAP_FULL:
        return store_fail(error, STORE_FULL,
                          "%s has reached its largest size (option map_size) while %s",
                          kv->directory, doing);
    case ENOSPC:
    case EDQUOT:
        return store_fail(error, STORE_FULL, "the disk of %s is full", kv->directory);
    case MDB_CORRUPTED:
    case MDB_PAGE_NOTFOUND:
    case MDB_INVALID:
        return store_fail(error, STORE_CORRUPT, "%s is damaged (%s, while %s)", kv->directory,
                          mdb_strerror(code), doing);
    case MDB_VERSION_MISMATCH:
        return store_fail(error, STORE_NEWER, "%s was written by another version of LMDB",
                          kv->directory);
    case EACCES:
    case EPERM:
    case EROFS:
    case ENOENT:
    case ENOTDIR:
        return store_fail(error, STORE_DENIED, "%s cannot be opened: %s", kv->directory,
                          mdb_strerror(code));
    default:
        return store_fail(error, STORE_BROKEN, "%s: %s while %s", kv->directory, mdb_strerror(code),
                          doing);
    }
}

static MDB_val to_val(struct kv_bytes bytes)
{
    return (MDB_val){.mv_size = bytes.size, .mv_data = (void *)(uintptr_t)bytes.data};
}

static struct kv_bytes from_val(MDB_val value)
{
    return kv_bytes_of(value.mv_data, value.mv_size);
}

/* --- the environment ---------------------------------------------------------------------------
 */

static int open_tables(struct kv *kv, const struct kv_settings *settings, struct store_error *error)
{
    MDB_txn *txn = NULL;
    int code = mdb_txn_begin(kv->env, NULL, 0, &txn);
    for (unsigned i = 0; i < settings->table_count && code == MDB_SUCCESS; i++) {
        code = mdb_dbi_open(txn, settings->tables[i], MDB_CREATE, &kv->tables[i]);
    }
    if (code == MDB_SUCCESS) {
        code = mdb_txn_commit(txn);
        txn = NULL;
    }
    if (txn) {
        mdb_txn_abort(txn);
    }
    kv->table_count = settings->table_count;
    return translate(kv, code, "opening its tables", error);
}

static int open_environment(struct kv *kv, const struct kv_settings *settings,
                            struct store_error *error)
{
    if (mkdir(settings->directory, 0700) < 0 && errno != EEXIST) {
        return translate(kv, errno, "making it", error);
    }
    int code = mdb_env_create(&kv->env);
    if (code == MDB_SUCCESS) {
        code = mdb_env_set_mapsize(kv->env, settings->map_bytes);
    }
    if (code == MDB_SUCCESS) {
        code = mdb_env_set_maxdbs(kv->env, KV_TABLES);
    }
    if (code == MDB_SUCCESS) {
        code = mdb_env_set_maxreaders(kv->env, MOST_READERS);
    }
    if (code == MDB_SUCCESS) {
        /* Readers come from a pool of threads: a slot belongs to the transaction, not the thread.
         */
        code = mdb_env_open(kv->env, settings->directory, MDB_NOTLS | MDB_NORDAHEAD, 0600);
    }
    return translate(kv, code, "opening it", error);
}

int kv_open(const struct kv_settings *settings, struct kv **ret_kv, struct store_error *error)
{
    if (settings->table_count > KV_TABLES) {
        return store_fail(error, STORE_DENIED, "more than %d tables", KV_TABLES);
    }
    struct kv *made = calloc(1, sizeof *made);
    if (!made) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    made->reserve_bytes = settings->reserve_bytes;
    made->directory = strdup(settings->directory);
    int result = made->directory ? STORE_OK : store_fail(error, STORE_NO_MEMORY, "out of memory");
    if (result == STORE_OK) {
        result = open_environment(made, settings, error);
    }
    if (result == STORE_OK) {
        kv_check_readers(made);
        result = open_tables(made, settings, error);
    }
    if (result != STORE_OK) {
        kv_close(made);
        return result;
    }
    *ret_kv = made;
    return STORE_OK;
}

void kv_close(struct kv *kv)
{
    if (!kv) {
        return;
    }
    if (kv->env) {
        mdb_env_close(kv->env);
    }
    free(kv->directory);
    free(kv);
}

uint64_t kv_file_bytes(const struct kv *kv)
{
    mdb_filehandle_t file = -1;
    struct stat status;
    if (mdb_env_get_fd(kv->env, &file) != MDB_SUCCESS || fstat(file, &status) < 0) {
        return 0;
    }
    return (uint64_t)status.st_size;
}

void kv_check_readers(struct kv *kv)
{
    int dead = 0;
    (void)mdb_reader_check(kv->env, &dead); /* only tidies up: a failure changes nothing */
}

/* --- transactions ------------------------------------------------------------------------------
 */

/* A full disk can show as EIO from a commit, which leaves the file in doubt: so look first. */
static int check_room(const struct kv *kv, struct store_error *error)
{
    struct statvfs status;
    if (statvfs(kv->directory, &status) < 0) {
        return translate(kv, errno, "asking for free space", error);
    }
    uint64_t left = (uint64_t)status.f_bavail * status.f_frsize;
    if (left < kv->reserve_bytes) {
        return store_fail(error, STORE_FULL,
                          "the disk of %s has %llu MiB left, the reserve (option disk_reserve) is "
                          "%zu MiB",
                          kv->directory, (unsigned long long)(left >> 20), kv->reserve_bytes >> 20);
    }
    return STORE_OK;
}

int kv_begin(struct kv *kv, bool write, struct kv_txn **ret_txn, struct store_error *error)
{
    if (write && atomic_load(&kv->broken)) {
        return store_fail(error, STORE_BROKEN,
                          "an earlier write to %s failed: nothing is written until a restart",
                          kv->directory);
    }
    struct kv_txn *made = calloc(1, sizeof *made);
    if (!made) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    made->kv = kv;
    made->write = write;
    int code = mdb_txn_begin(kv->env, NULL, write ? 0 : MDB_RDONLY, &made->txn);
    if (code != MDB_SUCCESS) {
        free(made);
        return translate(kv, code, "beginning a transaction", error);
    }
    *ret_txn = made;
    return STORE_OK;
}

int kv_commit(struct kv_txn *txn, struct store_error *error)
{
    struct kv *kv = txn->kv;
    if (txn->write && check_room(kv, error) != STORE_OK) {
        kv_abort(txn);
        return error->code;
    }
    int result = translate(kv, mdb_txn_commit(txn->txn), "committing", error);
    if (result != STORE_OK && result != STORE_FULL && result != STORE_NO_MEMORY) {
        atomic_store(&kv->broken, true);
    }
    free(txn);
    return result;
}

void kv_abort(struct kv_txn *txn)
{
    if (txn) {
        mdb_txn_abort(txn->txn);
        free(txn);
    }
}

/* --- entries -----------------------------------------------------------------------------------
 */

int kv_get(struct kv_txn *txn, unsigned table, struct kv_bytes key, struct kv_bytes *ret_value,
           struct store_error *error)
{
    MDB_val wanted = to_val(key);
    MDB_val found;
    int code = mdb_get(txn->txn, txn->kv->tables[table], &wanted, &found);
    if (code == MDB_SUCCESS) {
        *ret_value = from_val(found);
    }
    return translate(txn->kv, code, "reading", error);
}

static int put(struct kv_txn *txn, unsigned table, struct kv_bytes key, struct kv_bytes value,
               unsigned flags, struct store_error *error)
{
    MDB_val at = to_val(key);
    MDB_val what = to_val(value);
    return translate(txn->kv, mdb_put(txn->txn, txn->kv->tables[table], &at, &what, flags),
                     "writing", error);
}

int kv_put(struct kv_txn *txn, unsigned table, struct kv_bytes key, struct kv_bytes value,
           struct store_error *error)
{
    return put(txn, table, key, value, 0, error);
}

int kv_append(struct kv_txn *txn, unsigned table, struct kv_bytes key, struct kv_bytes value,
              struct store_error *error)
{
    return put(txn, table, key, value, MDB_APPEND, error);
}

int kv_delete(struct kv_txn *txn, unsigned table, struct kv_bytes key, struct store_error *error)
{
    MDB_val at = to_val(key);
    return translate(txn->kv, mdb_del(txn->txn, txn->kv->tables[table], &at, NULL), "deleting",
                     error);
}

int kv_clear(struct kv_txn *txn, unsigned table, struct store_error *error)
{
    return translate(txn->kv, mdb_drop(txn->txn, txn->kv->tables[table], 0), "emptying a table",
                     error);
}

int kv_count(struct kv_txn *txn, unsigned table, uint64_t *ret_count, struct store_error *error)
{
    MDB_stat status;
    int code = mdb_stat(txn->txn, txn->kv->tables[table], &status);
    if (code == MDB_SUCCESS) {
        *ret_count = status.ms_entries;
    }
    return translate(txn->kv, code, "counting", error);
}

int kv_walk(struct kv_txn *txn, unsigned table, struct kv_bytes from, kv_each each, void *user,
            struct store_error *error)
{
    struct kv_cursor at = {0};
    int code = mdb_cursor_open(txn->txn, txn->kv->tables[table], &at.cursor);
    if (code != MDB_SUCCESS) {
        return translate(txn->kv, code, "walking", error);
    }
    MDB_val key = to_val(from);
    MDB_val value;
    int result = STORE_OK;
    code = mdb_cursor_get(at.cursor, &key, &value, from.size ? MDB_SET_RANGE : MDB_FIRST);
    while (code == MDB_SUCCESS && result == STORE_OK) {
        result = each(user, &at, from_val(key), from_val(value));
        if (result == STORE_OK) {
            code = mdb_cursor_get(at.cursor, &key, &value, MDB_NEXT);
        }
    }
    mdb_cursor_close(at.cursor);
    if (code != MDB_SUCCESS && code != MDB_NOTFOUND) {
        return translate(txn->kv, code, "walking", error);
    }
    return result;
}

int kv_walk_delete(struct kv_cursor *at, struct store_error *error)
{
    int code = mdb_cursor_del(at->cursor, 0);
    if (code != MDB_SUCCESS) {
        return store_fail(error, STORE_BROKEN, "%s while deleting", mdb_strerror(code));
    }
    return STORE_OK;
}

int kv_last(struct kv_txn *txn, unsigned table, struct kv_bytes *ret_key,
            struct kv_bytes *ret_value, struct store_error *error)
{
    MDB_cursor *cursor = NULL;
    int code = mdb_cursor_open(txn->txn, txn->kv->tables[table], &cursor);
    if (code != MDB_SUCCESS) {
        return translate(txn->kv, code, "looking for the last entry", error);
    }
    MDB_val key;
    MDB_val value;
    code = mdb_cursor_get(cursor, &key, &value, MDB_LAST);
    mdb_cursor_close(cursor);
    if (code == MDB_SUCCESS) {
        *ret_key = from_val(key);
        *ret_value = from_val(value);
    }
    return translate(txn->kv, code, "looking for the last entry", error);
}

/* --- scrubbing ---------------------------------------------------------------------------------
 */

/* Pages that belong to nothing, by LMDB's own list of them (its table 0, as mdb_stat reads it). */
static int count_free_pages(struct kv *kv, size_t *ret_pages)
{
    MDB_txn *txn = NULL;
    MDB_cursor *cursor = NULL;
    size_t pages = 0;
    int code = mdb_txn_begin(kv->env, NULL, MDB_RDONLY, &txn);
    if (code != MDB_SUCCESS) {
        return code;
    }
    code = mdb_cursor_open(txn, 0, &cursor);
    if (code == MDB_SUCCESS) {
        MDB_val key;
        MDB_val list;
        while ((code = mdb_cursor_get(cursor, &key, &list, MDB_NEXT)) == MDB_SUCCESS) {
            size_t count = 0;
            memcpy(&count, list.mv_data, sizeof count);
            pages += count;
        }
        mdb_cursor_close(cursor);
    }
    mdb_txn_abort(txn);
    *ret_pages = pages;
    return code == MDB_NOTFOUND ? MDB_SUCCESS : code;
}

/* Puts `pages` values that fill a page each behind those that are there, in one commit. */
static int put_zero_pages(struct kv *kv, unsigned table, size_t pages)
{
    enum {
        PAGE_HEADER_BYTES = 16
    };
    MDB_stat status;
    MDB_txn *txn = NULL;
    int code = mdb_env_stat(kv->env, &status);
    size_t size = code == MDB_SUCCESS ? status.ms_psize - PAGE_HEADER_BYTES : 0;
    unsigned char *zeros = calloc(1, size ? size : 1);
    if (!zeros) {
        return ENOMEM;
    }
    if (code == MDB_SUCCESS) {
        code = mdb_txn_begin(kv->env, NULL, 0, &txn);
    }
    MDB_stat present = {0};
    if (code == MDB_SUCCESS) {
        code = mdb_stat(txn, kv->tables[table], &present);
    }
    for (size_t i = 0; i < pages && code == MDB_SUCCESS; i++) {
        uint64_t number = htobe64((uint64_t)(present.ms_entries + i));
        MDB_val key = {.mv_size = sizeof number, .mv_data = &number};
        MDB_val value = {.mv_size = size, .mv_data = zeros};
        code = mdb_put(txn, kv->tables[table], &key, &value, MDB_APPEND);
    }
    free(zeros);
    if (code != MDB_SUCCESS) {
        if (txn) {
            mdb_txn_abort(txn);
        }
        return code;
    }
    return mdb_txn_commit(txn);
}

static int clear_scratch(struct kv *kv, unsigned table)
{
    MDB_txn *txn = NULL;
    int code = mdb_txn_begin(kv->env, NULL, 0, &txn);
    if (code != MDB_SUCCESS) {
        return code;
    }
    code = mdb_drop(txn, kv->tables[table], 0);
    if (code != MDB_SUCCESS) {
        mdb_txn_abort(txn);
        return code;
    }
    return mdb_txn_commit(txn);
}

int kv_scrub(struct kv *kv, unsigned scratch_table, size_t most_pages, size_t *ret_left,
             struct store_error *error)
{
    if (check_room(kv, error) != STORE_OK) {
        return error->code;
    }
    /* LMDB gives out a freed page again only two commits later: two small ones come first. */
    size_t before = 0;
    size_t after = 0;
    int code = put_zero_pages(kv, scratch_table, 1);
    if (code == MDB_SUCCESS) {
        code = put_zero_pages(kv, scratch_table, 1);
    }
    if (code == MDB_SUCCESS) {
        code = count_free_pages(kv, &before);
    }
    if (code == MDB_SUCCESS) {
        code = put_zero_pages(kv, scratch_table, before < most_pages ? before : most_pages);
    }
    if (code == MDB_SUCCESS) {
        code = count_free_pages(kv, &after);
    }
    bool goes_on = code == MDB_SUCCESS && before > most_pages && after < before;
    if (!goes_on) {
        int cleared = clear_scratch(kv, scratch_table);
        code = code == MDB_SUCCESS ? cleared : code;
    }
    if (code == MDB_SUCCESS) {
        *ret_left = goes_on ? after : 0;
    }
    return translate(kv, code, "scrubbing", error);
}
