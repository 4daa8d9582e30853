/*
 * Scrubbing: what was deleted is gone from the bytes of the file as well.
 *
 * LMDB leaves deleted bytes in three places: in pages that belong to nothing any more; in the gap
 * in the middle of a page, when an entry was deleted from it; and in the buffers in which it makes
 * new pages and which it uses again without clearing them, so that bytes of one page come to stand
 * in the gap of another. So a round begins by opening the environment anew, which drops the
 * buffers, and then goes over the file once: free pages become zeros, and so do the gaps of the
 * pages of tables, through the file and not through a transaction, since neither is ever read.
 *
 * That is done under LMDB's lock for writing, so no page changes its owner meanwhile, and only when
 * no reader is at an older state than the last commit, for which some free pages are not free. A
 * page that is written behind the round's back comes from buffers that saw only what was there when
 * the round began. A power failure in the middle hurts nothing: no byte that is read is changed.
 *
 * A page whose header does not look like one is left alone.
 */
#include <errno.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#include "storage/kv_page.h"
#include "storage/kv_private.h"

enum {
    MOST_WAIT_NS = 20000000, /* for readers, before a round begins: 20 ms */
    LEAST_PAGES = 16         /* to a call */
};

enum page_kind {
    KIND_TABLE,
    KIND_FREE,
    KIND_RUN,    /* inside a run of the free list */
    KIND_RUN_END /* its last page; `end` says where its value ends */
};

struct page_state {
    enum page_kind kind;
    size_t end;
};

/* The part of a round that one call does. */
struct stretch {
    size_t first;
    size_t count;
    size_t page_bytes;
    struct page_state *states;
    unsigned char *bytes;
};

/* --- what each page is -------------------------------------------------------------------------
 */

static struct page_state *state_of(const struct stretch *stretch, size_t page)
{
    bool inside = page >= stretch->first && page - stretch->first < stretch->count;
    return inside ? &stretch->states[page - stretch->first] : NULL;
}

static void mark_free(const struct stretch *stretch, const MDB_val *list)
{
    size_t count = 0;
    memcpy(&count, list->mv_data, sizeof count);
    for (size_t i = 1; i <= count && (i + 1) * sizeof count <= list->mv_size; i++) {
        size_t page = 0;
        memcpy(&page, (const unsigned char *)list->mv_data + i * sizeof page, sizeof page);
        struct page_state *state = state_of(stretch, page);
        if (state) {
            state->kind = KIND_FREE;
        }
    }
}

/* A long list stands in a run of pages of its own. */
static void mark_run(const struct stretch *stretch, const MDB_val *list)
{
    struct kv_page_header header;
    memcpy(&header, (const unsigned char *)list->mv_data - sizeof header, sizeof header);
    size_t bytes = sizeof header + list->mv_size;
    for (uint32_t i = 0; i < header.size.run; i++) {
        struct page_state *state = state_of(stretch, header.number + i);
        bool is_last = i + 1 == header.size.run;
        if (state) {
            state->kind = is_last ? KIND_RUN_END : KIND_RUN;
            state->end = is_last ? bytes - i * stretch->page_bytes : 0;
        }
    }
}

/* The list can be read only in a transaction for reading: it runs beside the one for writing. */
static int classify(MDB_env *env, const struct stretch *stretch)
{
    MDB_txn *txn = NULL;
    MDB_cursor *cursor = NULL;
    MDB_val key;
    MDB_val list;
    int code = mdb_txn_begin(env, NULL, MDB_RDONLY, &txn);
    if (code != MDB_SUCCESS) {
        return code;
    }
    code = mdb_cursor_open(txn, KV_FREE_TABLE, &cursor);
    if (code != MDB_SUCCESS) {
        mdb_txn_abort(txn);
        return code;
    }
    while ((code = mdb_cursor_get(cursor, &key, &list, MDB_NEXT)) == MDB_SUCCESS) {
        mark_free(stretch, &list);
        if (key.mv_size + list.mv_size > KV_ENTRY_BYTES) {
            mark_run(stretch, &list);
        }
    }
    mdb_cursor_close(cursor);
    mdb_txn_abort(txn);
    return code == MDB_NOTFOUND ? MDB_SUCCESS : code;
}

/* --- clearing ----------------------------------------------------------------------------------
 */

/* Where the bytes of a page that are never read begin and end; equal where there are none. */
static void find_unread(const struct stretch *stretch, size_t index, size_t *ret_from,
                        size_t *ret_to)
{
    const struct page_state *state = &stretch->states[index];
    struct kv_page_header header;
    memcpy(&header, stretch->bytes + index * stretch->page_bytes, sizeof header);
    bool is_table = header.number == stretch->first + index &&
                    (header.flags == KV_PAGE_BRANCH || header.flags == KV_PAGE_LEAF) &&
                    header.size.gap.lower >= sizeof header &&
                    header.size.gap.lower <= header.size.gap.upper &&
                    header.size.gap.upper <= stretch->page_bytes;
    *ret_from = 0;
    *ret_to = 0;
    if (state->kind == KIND_FREE) {
        *ret_to = stretch->page_bytes;
    } else if (state->kind == KIND_RUN_END) {
        *ret_from = state->end;
        *ret_to = stretch->page_bytes;
    } else if (state->kind == KIND_TABLE && is_table) {
        *ret_from = header.size.gap.lower;
        *ret_to = header.size.gap.upper;
    }
}

static bool is_clear(const unsigned char *bytes, size_t size)
{
    return size == 0 || (bytes[0] == 0 && memcmp(bytes, bytes + 1, size - 1) == 0);
}

static int clear_unread(const struct stretch *stretch, int file, bool *ret_written)
{
    for (size_t i = 0; i < stretch->count; i++) {
        size_t from = 0;
        size_t to = 0;
        find_unread(stretch, i, &from, &to);
        size_t at = i * stretch->page_bytes + from;
        if (from >= to || is_clear(stretch->bytes + at, to - from)) {
            continue;
        }
        memset(stretch->bytes + at, 0, to - from);
        ssize_t written = pwrite(file, stretch->bytes + at, to - from,
                                 (off_t)(stretch->first * stretch->page_bytes + at));
        if (written < 0 || (size_t)written != to - from) {
            return written < 0 ? errno : EIO;
        }
        *ret_written = true;
    }
    return MDB_SUCCESS;
}

static int clear_stretch(MDB_env *env, const struct stretch *stretch)
{
    mdb_filehandle_t file = -1;
    bool is_written = false;
    size_t bytes = stretch->count * stretch->page_bytes;
    int code = mdb_env_get_fd(env, &file);
    if (code == MDB_SUCCESS) {
        code = classify(env, stretch);
    }
    if (code != MDB_SUCCESS) {
        return code;
    }
    ssize_t got = pread(file, stretch->bytes, bytes, (off_t)(stretch->first * stretch->page_bytes));
    if (got < 0) {
        return errno;
    }
    /* A page that was made and freed in one transaction is never written: the file may end before
     * it, and then there is nothing to clear. */
    memset(stretch->bytes + got, 0, bytes - (size_t)got);
    code = clear_unread(stretch, file, &is_written);
    if (code == MDB_SUCCESS && is_written && fdatasync(file) < 0) {
        code = errno;
    }
    return code;
}

/* --- a round -----------------------------------------------------------------------------------
 */

/* "pid thread transaction" of a reader; anything else (a heading, an idle reader) has no number. */
static int take_oldest(const char *line, void *user)
{
    size_t *oldest = user;
    const char *last = strrchr(line, ' ');
    if (last && last[1] >= '0' && last[1] <= '9') {
        size_t transaction = strtoull(last, NULL, 10);
        *oldest = transaction < *oldest ? transaction : *oldest;
    }
    return 0;
}

/* Whether a reader, here or in another process, is at a state before the last commit. */
static bool is_reader_behind(MDB_txn *writing)
{
    int dead = 0;
    size_t oldest = SIZE_MAX;
    (void)mdb_reader_check(mdb_txn_env(writing), &dead); /* only tidies up */
    if (mdb_reader_list(mdb_txn_env(writing), take_oldest, &oldest) < 0) {
        return true;
    }
    return oldest < mdb_txn_id(writing) - 1;
}

static int count_pages(struct kv *kv, size_t *ret_pages, size_t *ret_page_bytes)
{
    MDB_envinfo info;
    MDB_stat status;
    int code = mdb_env_info(kv->env, &info);
    if (code == MDB_SUCCESS) {
        code = mdb_env_stat(kv->env, &status);
    }
    if (code == MDB_SUCCESS) {
        *ret_pages = info.me_last_pgno + 1;
        *ret_page_bytes = status.ms_psize;
    }
    return code;
}

/* Does the next pages of the round, unless a reader is in the way. */
static int go_on(struct kv *kv, size_t most_pages)
{
    MDB_txn *txn = NULL;
    size_t pages = 0;
    struct stretch stretch = {.first = kv->round.next, .count = kv->round.end - kv->round.next};
    stretch.count = stretch.count < most_pages ? stretch.count : most_pages;
    int code = count_pages(kv, &pages, &stretch.page_bytes);
    if (code != MDB_SUCCESS) {
        return code;
    }
    stretch.states = calloc(stretch.count, sizeof *stretch.states);
    stretch.bytes = malloc(stretch.count * stretch.page_bytes);
    code = stretch.states && stretch.bytes ? mdb_txn_begin(kv->env, NULL, 0, &txn) : ENOMEM;
    if (code == MDB_SUCCESS && !is_reader_behind(txn)) {
        code = clear_stretch(kv->env, &stretch);
        kv->round.next += code == MDB_SUCCESS ? stretch.count : 0;
    }
    if (txn) {
        mdb_txn_abort(txn);
    }
    free(stretch.states);
    free(stretch.bytes);
    return code;
}

/*
 * Keeps new transactions out until those that run have ended, but only for a moment: a transaction
 * that waits for another of its own thread goes on. The gate is the caller's. True when none runs.
 */
static bool shut(struct kv *kv)
{
    struct timespec until;
    if (kv->copies > 0) {
        return false; /* that is no matter of moments: who asks is not kept waiting for nothing */
    }
    int code = clock_gettime(CLOCK_MONOTONIC, &until) == 0 ? 0 : errno;
    until.tv_nsec += MOST_WAIT_NS;
    if (until.tv_nsec >= 1000000000L) {
        until.tv_nsec -= 1000000000L;
        until.tv_sec++;
    }
    kv->is_shut = true;
    while (kv->running > 0 && code == 0) {
        code = pthread_cond_timedwait(&kv->moved, &kv->gate, &until);
    }
    return kv->running == 0;
}

static void open_gate(struct kv *kv)
{
    kv->is_shut = false;
    (void)pthread_cond_broadcast(&kv->moved); /* never fails for an initialised one */
}

/* The gate is the caller's, who opens it again. False where a transaction is in the way. */
static bool open_anew(struct kv *kv, int *ret_result, struct store_error *error)
{
    if (!shut(kv)) {
        return false;
    }
    if (kv->env) {
        mdb_env_close(kv->env);
    }
    kv->env = NULL;
    *ret_result = kv_open_environment(kv, error);
    return true;
}

bool kv_open_anew(struct kv *kv)
{
    int result = STORE_OK;
    struct store_error reason = {0}; /* whoever begins a transaction finds it out again */
    (void)pthread_mutex_lock(&kv->gate);
    bool is_open = open_anew(kv, &result, &reason) && result == STORE_OK;
    open_gate(kv);
    (void)pthread_mutex_unlock(&kv->gate);
    return is_open;
}

/* Opens the environment anew and begins a round, unless a transaction is in the way. */
static int begin_round(struct kv *kv, struct store_error *error)
{
    int result = STORE_OK;
    size_t page_bytes = 0;
    (void)pthread_mutex_lock(&kv->gate); /* fails only for mutexes of other kinds */
    if (open_anew(kv, &result, error)) {
        if (result == STORE_OK) {
            result =
                kv_translate(kv, count_pages(kv, &kv->round.end, &page_bytes), "scrubbing", error);
        }
        kv->round.next = KV_FIRST_PAGE;
        kv->round.due = false;
    }
    open_gate(kv);
    (void)pthread_mutex_unlock(&kv->gate);
    return result;
}

static bool is_under_way(const struct kv *kv)
{
    return kv->round.next < kv->round.end;
}

int kv_scrub(struct kv *kv, size_t most_pages, size_t *ret_left, struct store_error *error)
{
    if (!is_under_way(kv) && !kv->round.due) {
        *ret_left = 0;
        return STORE_OK;
    }
    if (atomic_load(&kv->broken)) {
        return store_fail(error, STORE_BROKEN, "an earlier write to %s failed", kv->directory);
    }
    int result = is_under_way(kv) ? STORE_OK : begin_round(kv, error);
    if (result == STORE_OK && is_under_way(kv)) {
        result = kv_translate(kv, go_on(kv, most_pages < LEAST_PAGES ? LEAST_PAGES : most_pages),
                              "scrubbing", error);
    }
    if (result != STORE_OK) {
        kv->round = (struct kv_round){.due = true}; /* no byte that is read was changed */
        return result;
    }
    *ret_left = kv->round.end - kv->round.next + (kv->round.due ? 1 : 0);
    return STORE_OK;
}
