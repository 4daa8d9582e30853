/*
 * LMDB writes a copy to a descriptor and asks for nothing on the way. So it writes into a pipe, on
 * a thread of its own, and the caller's thread reads: pace, progress, room and the end are the
 * caller's. Whoever stops closes his end, and LMDB finds that nobody reads.
 */
#include "storage/kv_copy.h"

#include <errno.h>
#include <fcntl.h>
#include <stdlib.h>
#include <unistd.h>

#include "storage/kv_page.h"
#include "storage/kv_private.h"

enum {
    PIECE_BYTES = 64 * 1024
};

struct writing {
    MDB_env *env;
    int pipe; /* closed by the thread */
    int code; /* LMDB's or an errno */
};

static void *write_copy(void *argument)
{
    struct writing *writing = argument;
    writing->code = mdb_env_copyfd2(writing->env, writing->pipe, MDB_CP_COMPACT);
    (void)close(writing->pipe); /* the other side sees the end; what was lost is in the code */
    return NULL;
}

/* Hands on what comes until the end; -1 with errno, or 1 where `take` has ended it. */
static int read_copy(int pipe, kv_take take, void *user, unsigned char *piece)
{
    for (;;) {
        ssize_t got = read(pipe, piece, PIECE_BYTES);
        if (got == 0) {
            return 0;
        }
        if (got < 0 && errno != EINTR) {
            return -1;
        }
        if (got > 0 && take(user, piece, (size_t)got) != 0) {
            return 1;
        }
    }
}

static int fail_errno(const struct kv *kv, int code, struct store_error *error)
{
    return store_fail(error, code == ENOMEM ? STORE_NO_MEMORY : STORE_BROKEN,
                      "%s cannot be copied: %s", kv->directory, strerror(code));
}

static int copy(struct kv *kv, kv_take take, void *user, unsigned char *piece,
                struct store_error *error)
{
    int ends[2];
    pthread_t thread;
    if (pipe2(ends, O_CLOEXEC) < 0) {
        return fail_errno(kv, errno, error);
    }
    struct writing writing = {.env = kv->env, .pipe = ends[1]};
    int code = pthread_create(&thread, NULL, write_copy, &writing);
    if (code != 0) {
        (void)close(ends[0]); /* nothing has gone through it */
        (void)close(ends[1]);
        return fail_errno(kv, code, error);
    }
    int taken = read_copy(ends[0], take, user, piece);
    code = errno;
    (void)close(ends[0]);             /* from now on nobody reads: LMDB ends, if it has not yet */
    (void)pthread_join(thread, NULL); /* fails only for what is no thread */
    if (taken != 0) {
        return taken > 0 ? STORE_STOPPED : fail_errno(kv, code, error);
    }
    return kv_translate(kv, writing.code, "copying it", error);
}

static void count_copies(struct kv *kv, bool begins)
{
    (void)pthread_mutex_lock(&kv->gate); /* fails only for mutexes of other kinds */
    kv->copies = begins ? kv->copies + 1 : kv->copies - 1;
    (void)pthread_mutex_unlock(&kv->gate);
}

int kv_copy(struct kv *kv, kv_take take, void *user, struct store_error *error)
{
    unsigned char *piece = malloc(PIECE_BYTES);
    if (!piece) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    /* The environment stays open: nobody opens it anew while somebody is in it. */
    int result = kv_enter(kv, false, error);
    if (result == STORE_OK) {
        count_copies(kv, true);
        result = copy(kv, take, user, piece, error);
        count_copies(kv, false);
        kv_leave(kv);
    }
    free(piece);
    return result;
}

/* --- how large it will be -----------------------------------------------------------------------
 */

/* The pages that a copy leaves out: those in the lists of free ones, and the lists' own. */
static int count_free(MDB_txn *txn, uint64_t *ret_pages)
{
    MDB_cursor *cursor = NULL;
    MDB_val key;
    MDB_val list;
    MDB_stat status;
    int code = mdb_stat(txn, KV_FREE_TABLE, &status);
    if (code == MDB_SUCCESS) {
        code = mdb_cursor_open(txn, KV_FREE_TABLE, &cursor);
    }
    if (code != MDB_SUCCESS) {
        return code;
    }
    uint64_t pages = status.ms_branch_pages + status.ms_leaf_pages + status.ms_overflow_pages;
    while ((code = mdb_cursor_get(cursor, &key, &list, MDB_NEXT)) == MDB_SUCCESS) {
        size_t count = 0;
        memcpy(&count, list.mv_data, sizeof count);
        pages += count;
    }
    mdb_cursor_close(cursor);
    *ret_pages = pages;
    return code == MDB_NOTFOUND ? MDB_SUCCESS : code;
}

int kv_copy_bytes(struct kv *kv, uint64_t *ret_bytes, struct store_error *error)
{
    MDB_envinfo info;
    MDB_stat status;
    uint64_t left_out = 0;
    struct kv_txn *txn = NULL;
    int result = kv_begin(kv, false, &txn, error);
    if (result != STORE_OK) {
        return result;
    }
    int code = count_free(txn->txn, &left_out);
    if (code == MDB_SUCCESS) {
        code = mdb_env_info(kv->env, &info);
    }
    if (code == MDB_SUCCESS) {
        code = mdb_env_stat(kv->env, &status);
    }
    kv_abort(txn);
    if (code != MDB_SUCCESS) {
        return kv_translate(kv, code, "measuring it", error);
    }
    uint64_t pages = info.me_last_pgno + 1;
    *ret_bytes = (pages > left_out ? pages - left_out : 0) * status.ms_psize;
    return STORE_OK;
}
