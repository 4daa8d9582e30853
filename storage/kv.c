#include "storage/kv.h"

#include <errno.h>
#include <fcntl.h>
#include <limits.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sys/statvfs.h>
#include <time.h>
#include <unistd.h>

#include "storage/kv_private.h"

enum {
    MOST_READERS = 126,
    FULL_BYTES = 1 << 20, /* a disk with less left is full */
    RUN_BYTES = 256 << 10 /* seldom free in one piece by chance */
};

int kv_translate(const struct kv *kv, int code, const char *doing, struct store_error *error)
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
                          "%s has reached its largest size while %s: raise map_size and restart",
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
        return store_fail(error, kv->is_open ? STORE_BROKEN : STORE_DENIED,
                          "%s cannot be opened: %s", kv->directory, mdb_strerror(code));
    default:
        return store_fail(error, STORE_BROKEN, "%s: %s while %s", kv->directory, mdb_strerror(code),
                          doing);
    }
}

/* --- the environment ---------------------------------------------------------------------------
 */

int kv_open_environment(struct kv *kv, struct store_error *error)
{
    int dead = 0;
    int code = mdb_env_create(&kv->env);
    if (code == MDB_SUCCESS) {
        code = mdb_env_set_mapsize(kv->env, kv->map_bytes);
    }
    if (code == MDB_SUCCESS) {
        code = mdb_env_set_maxdbs(kv->env, KV_TABLES);
    }
    if (code == MDB_SUCCESS) {
        code = mdb_env_set_maxreaders(kv->env, MOST_READERS);
    }
    if (code == MDB_SUCCESS) {
        /* Readers come from a pool of threads: a slot is the transaction's, not the thread's. */
        unsigned flags = MDB_NOTLS | MDB_NORDAHEAD | (kv->read_only ? MDB_RDONLY : 0) |
                         (kv->is_alone ? MDB_NOLOCK : 0);
        code = mdb_env_open(kv->env, kv->directory, flags, 0600);
    }
    int result = kv_translate(kv, code, "opening it", error);
    if (result == STORE_OK && !kv->read_only) {
        (void)mdb_reader_check(kv->env, &dead); /* only tidies up: a failure changes nothing */
    }
    if (result == STORE_OK) {
        result = kv_open_tables(kv, error);
    }
    if (result != STORE_OK && kv->env) {
        mdb_env_close(kv->env);
        kv->env = NULL;
    }
    return result;
}

static int prepare(struct kv *made, const struct kv_settings *settings, struct store_error *error)
{
    made->map_bytes = settings->map_bytes;
    made->reserve_bytes = settings->reserve_bytes;
    made->names = settings->tables;
    made->table_count = settings->table_count;
    made->earlier_names = settings->earlier_tables;
    made->earlier_count = settings->earlier_count;
    made->read_only = settings->read_only;
    made->is_alone = settings->read_only && settings->is_alone;
    made->round.due = true; /* an earlier life may have ended between erasing and scrubbing */
    made->directory = strdup(settings->directory);
    if (!made->directory) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    if (!settings->read_only && mkdir(settings->directory, 0700) < 0 && errno != EEXIST) {
        return kv_translate(made, errno, "making it", error);
    }
    return kv_open_environment(made, error);
}

static int make_gate(struct kv *made)
{
    pthread_condattr_t attributes;
    int result = -1;
    if (pthread_condattr_init(&attributes) != 0) {
        return -1;
    }
    if (pthread_condattr_setclock(&attributes, CLOCK_MONOTONIC) == 0 &&
        pthread_cond_init(&made->moved, &attributes) == 0) {
        result = pthread_mutex_init(&made->gate, NULL) == 0 ? 0 : -1;
        if (result < 0) {
            (void)pthread_cond_destroy(&made->moved); /* nobody waits */
        }
    }
    (void)pthread_condattr_destroy(&attributes); /* never fails here */
    return result;
}

int kv_open(const struct kv_settings *settings, struct kv **ret_kv, struct store_error *error)
{
    if (settings->table_count > KV_TABLES) {
        return store_fail(error, STORE_DENIED, "more than %d tables", KV_TABLES);
    }
    struct kv *made = calloc(1, sizeof *made);
    if (!made || make_gate(made) < 0) {
        free(made);
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    int result = prepare(made, settings, error);
    if (result != STORE_OK) {
        kv_close(made);
        return result;
    }
    made->is_open = true;
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
    (void)pthread_cond_destroy(&kv->moved); /* fail only while somebody waits or holds it */
    (void)pthread_mutex_destroy(&kv->gate);
    free(kv->directory);
    free(kv);
}

bool kv_is_broken(const struct kv *kv)
{
    return kv && atomic_load(&kv->broken);
}

uint64_t kv_file_bytes(const struct kv *kv)
{
    char path[PATH_MAX];
    struct stat status;
    int length = snprintf(path, sizeof path, "%s/data.mdb", kv->directory);
    if (length < 0 || (size_t)length >= sizeof path || stat(path, &status) < 0) {
        return 0;
    }
    return (uint64_t)status.st_size;
}

int kv_exchange(struct kv *one, struct kv *other, struct store_error *error)
{
    if (renameat2(AT_FDCWD, one->directory, AT_FDCWD, other->directory, RENAME_EXCHANGE) < 0) {
        int code = errno;
        return store_fail(error, STORE_BROKEN, "%s and %s cannot be exchanged: %s", one->directory,
                          other->directory, strerror(code));
    }
    char *directory = one->directory;
    one->directory = other->directory;
    other->directory = directory;
    return STORE_OK;
}

/* --- transactions ------------------------------------------------------------------------------
 */

static int ask_room(const struct kv *kv, uint64_t *ret_bytes, struct store_error *error)
{
    struct statvfs status;
    if (statvfs(kv->directory, &status) < 0) {
        return kv_translate(kv, errno, "asking for free space", error);
    }
    *ret_bytes = (uint64_t)status.f_bavail * status.f_frsize;
    return STORE_OK;
}

/* A full disk can show as EIO from a commit, which leaves the file in doubt: so look first. */
static int check_room(const struct kv *kv, struct store_error *error)
{
    uint64_t left = 0;
    int result = ask_room(kv, &left, error);
    if (result == STORE_OK && left < kv->reserve_bytes) {
        return store_fail(error, STORE_FULL,
                          "the disk of %s has %llu MiB left, the reserve (option disk_reserve) is "
                          "%zu MiB",
                          kv->directory, (unsigned long long)(left >> 20), kv->reserve_bytes >> 20);
    }
    return result;
}

/* Whatever the reserve: a write is cut short only where next to nothing is left behind it. */
static bool is_disk_full(const struct kv *kv)
{
    uint64_t left = 0;
    struct store_error unknown = {0};
    uint64_t least = kv->reserve_bytes > FULL_BYTES ? kv->reserve_bytes : FULL_BYTES;
    return ask_room(kv, &left, &unknown) == STORE_OK && left < least;
}

int kv_enter(struct kv *kv, bool write, struct store_error *error)
{
    (void)pthread_mutex_lock(&kv->gate); /* fails only for mutexes of other kinds */
    while (kv->is_shut) {
        (void)pthread_cond_wait(&kv->moved, &kv->gate); /* likewise; it is looked at again */
    }
    /* A round of scrubbing may have failed to open it again: perhaps now. */
    struct store_error reason = {0};
    bool open = kv->env || kv_open_environment(kv, &reason) == STORE_OK;
    bool refused = write && atomic_load(&kv->broken);
    kv->running += open && !refused ? 1 : 0;
    (void)pthread_mutex_unlock(&kv->gate);
    if (open && !refused) {
        return STORE_OK;
    }
    if (!open) {
        return store_fail(error, STORE_BROKEN, "%s could not be opened again (%s)", kv->directory,
                          reason.text);
    }
    return store_fail(error, STORE_BROKEN,
                      "an earlier write to %s failed: nothing is written until a restart",
                      kv->directory);
}

void kv_leave(struct kv *kv)
{
    (void)pthread_mutex_lock(&kv->gate);
    kv->running--;
    if (kv->running == 0 && kv->is_shut) {
        (void)pthread_cond_broadcast(&kv->moved); /* never fails for an initialised one */
    }
    (void)pthread_mutex_unlock(&kv->gate);
}

static int begin_in(struct kv *kv, bool write, struct kv_txn *made, struct store_error *error)
{
    int result = kv_enter(kv, write, error);
    if (result != STORE_OK) {
        return result;
    }
    int code = mdb_txn_begin(kv->env, NULL, write ? 0 : MDB_RDONLY, &made->txn);
    if (code == MDB_SUCCESS) {
        return STORE_OK;
    }
    kv_leave(kv);
    made->is_panic = code == MDB_PANIC;
    return kv_translate(kv, code, "beginning a transaction", error);
}

/*
 * Where the last page of a commit, by which it comes to count, could not be written, LMDB lets
 * nobody in any more, not even to read (MDB_PANIC), until it is opened anew. What was committed
 * before is whole and can be read; writing waits for a restart, as after any failed write.
 */
int kv_begin(struct kv *kv, bool write, struct kv_txn **ret_txn, struct store_error *error)
{
    struct store_error reason = {0};
    struct kv_txn *made = calloc(1, sizeof *made);
    if (!made) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    made->kv = kv;
    made->write = write;
    int result = begin_in(kv, write, made, &reason);
    if (result != STORE_OK && made->is_panic) {
        atomic_store(&kv->broken, true);
        if (!write && kv_open_anew(kv)) {
            reason = (struct store_error){0};
            result = begin_in(kv, write, made, &reason);
        }
    }
    if (result != STORE_OK) {
        free(made);
        return store_fail(error, reason.code, "%s", reason.text);
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
    int code = mdb_txn_commit(txn->txn);
    if (code == EIO && txn->write && is_disk_full(kv)) {
        code = ENOSPC; /* a write cut short by a full disk; the environment is as it was */
    }
    int result = kv_translate(kv, code, "committing", error);
    if (result != STORE_OK && result != STORE_FULL && result != STORE_NO_MEMORY) {
        atomic_store(&kv->broken, true);
    }
    if (result == STORE_OK && txn->deletes) {
        kv->round.due = true;
    }
    kv_leave(kv);
    free(txn);
    return result;
}

void kv_abort(struct kv_txn *txn)
{
    if (txn) {
        mdb_txn_abort(txn->txn);
        kv_leave(txn->kv);
        free(txn);
    }
}

/* --- entries -----------------------------------------------------------------------------------
 */

int kv_get(struct kv_txn *txn, unsigned table, struct kv_bytes key, struct kv_bytes *ret_value,
           struct store_error *error)
{
    MDB_val wanted = kv_to_val(key);
    MDB_val found;
    int code = mdb_get(txn->txn, txn->kv->tables[table], &wanted, &found);
    if (code == MDB_SUCCESS) {
        *ret_value = kv_from_val(found);
    }
    return kv_translate(txn->kv, code, "reading", error);
}

static int put(struct kv_txn *txn, unsigned table, struct kv_bytes key, struct kv_bytes value,
               unsigned flags, struct store_error *error)
{
    MDB_val at = kv_to_val(key);
    MDB_val what = kv_to_val(value);
    if (key.size + value.size > KV_ENTRY_BYTES) {
        return store_fail(error, STORE_BROKEN, "an entry of %zu bytes is too large",
                          key.size + value.size);
    }
    return kv_translate(txn->kv, mdb_put(txn->txn, txn->kv->tables[table], &at, &what, flags),
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
    txn->deletes = true;
    return kv_take_out(txn, table, key, error);
}

int kv_take_out(struct kv_txn *txn, unsigned table, struct kv_bytes key, struct store_error *error)
{
    MDB_val at = kv_to_val(key);
    return kv_translate(txn->kv, mdb_del(txn->txn, txn->kv->tables[table], &at, NULL), "deleting",
                        error);
}

int kv_clear(struct kv_txn *txn, unsigned table, struct store_error *error)
{
    txn->deletes = true;
    return kv_translate(txn->kv, mdb_drop(txn->txn, txn->kv->tables[table], 0), "emptying a table",
                        error);
}

int kv_count(struct kv_txn *txn, unsigned table, uint64_t *ret_count, struct store_error *error)
{
    MDB_stat status;
    int code = mdb_stat(txn->txn, txn->kv->tables[table], &status);
    if (code == MDB_SUCCESS) {
        *ret_count = status.ms_entries;
    }
    return kv_translate(txn->kv, code, "counting", error);
}

int kv_count_pages(struct kv_txn *txn, unsigned table, uint64_t *ret_count,
                   struct store_error *error)
{
    MDB_stat status;
    int code = mdb_stat(txn->txn, txn->kv->tables[table], &status);
    if (code == MDB_SUCCESS) {
        *ret_count = status.ms_leaf_pages;
    }
    return kv_translate(txn->kv, code, "counting", error);
}

int kv_gather_free_pages(struct kv_txn *txn, unsigned table, struct kv_bytes key,
                         struct store_error *error)
{
    MDB_val at = kv_to_val(key);
    MDB_val run = {.mv_size = RUN_BYTES};
    int code = mdb_put(txn->txn, txn->kv->tables[table], &at, &run, MDB_RESERVE);
    if (code == MDB_SUCCESS) {
        memset(run.mv_data, 0, run.mv_size);
    }
    return kv_translate(txn->kv, code, "writing", error);
}
