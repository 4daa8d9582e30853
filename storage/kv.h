/*
 * kv: ordered tables of bytes in one LMDB environment. Only kv.c, kv_copy.c,
 * kv_cursor.c, kv_pages.c and kv_scrub.c know LMDB.
 *
 * One environment a directory and process. Any number of threads may read, each in a transaction of
 * its own; one thread writes at a time. Bytes handed out point into the map and are valid until the
 * transaction ends or, in a writing one, until its next write. No transaction may outlive one job.
 *
 * A commit that fails because there is no room (map or disk) leaves everything as it was and may be
 * tried again; one that fails otherwise may have left the file in doubt: the environment then
 * refuses every later write with STORE_BROKEN until it is opened anew.
 */
#ifndef UNDERTAG_KV_H
#define UNDERTAG_KV_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "storage/store_error.h"

struct kv;
struct kv_txn;
struct kv_cursor;

struct kv_bytes {
    const void *data;
    size_t size;
};

enum {
    KV_KEY_BYTES = 511,    /* the longest key */
    KV_ENTRY_BYTES = 2022, /* key and value together: a larger one would leave its leaf page */
    KV_VALUE_BYTES = 2000, /* the largest value of a short key: callers cut a longer into pieces */
    KV_TABLES = 16         /* at most */
};

struct kv_settings {
    const char *directory;     /* made if it is not there (its parent must be) */
    size_t map_bytes;          /* the most that the environment may grow to */
    size_t reserve_bytes;      /* room on the disk that commits leave free */
    const char *const *tables; /* names; a table is then named by its place in the list; borrowed
                                  until kv_close */
    unsigned table_count;
    const char *const *earlier_tables; /* names that only earlier versions gave; borrowed, too */
    unsigned earlier_count;
    bool read_only; /* nothing is made or changed, not even on opening, but for LMDB's lock file; */
    bool is_alone;  /* nor that: nobody else opens it. With read_only */
};

/* Opens or makes the environment with its tables. STORE_CORRUPT where one is missing beside one
 * that nobody knows; STORE_NOT_FOUND where one is missing otherwise, read-only. */
int kv_open(const struct kv_settings *settings, struct kv **ret_kv, struct store_error *error)
    __attribute__((warn_unused_result));
void kv_close(struct kv *kv);

/* Whether a write has failed so that none is taken any more. Any thread. */
bool kv_is_broken(const struct kv *kv);

/* Bytes of the file. */
uint64_t kv_file_bytes(const struct kv *kv);

/*
 * Has two open environments of one file system change their directories' names, in one step of the
 * file system: a crash leaves both as they were or both exchanged. It is durable once the
 * directory that holds them has been synced. Nobody else may use either meanwhile. On failure both
 * are as they were.
 */
int kv_exchange(struct kv *one, struct kv *other, struct store_error *error)
    __attribute__((warn_unused_result));

int kv_begin(struct kv *kv, bool write, struct kv_txn **ret_txn, struct store_error *error)
    __attribute__((warn_unused_result));

/* Ends the transaction in either case. A commit of a writing transaction is durable on return. */
int kv_commit(struct kv_txn *txn, struct store_error *error) __attribute__((warn_unused_result));
void kv_abort(struct kv_txn *txn);

/* STORE_NOT_FOUND is returned without a sentence: it is an answer. */
int kv_get(struct kv_txn *txn, unsigned table, struct kv_bytes key, struct kv_bytes *ret_value,
           struct store_error *error) __attribute__((warn_unused_result));
int kv_put(struct kv_txn *txn, unsigned table, struct kv_bytes key, struct kv_bytes value,
           struct store_error *error) __attribute__((warn_unused_result));

/* The same for a key behind all others of its table, which fills pages better. */
int kv_append(struct kv_txn *txn, unsigned table, struct kv_bytes key, struct kv_bytes value,
              struct store_error *error) __attribute__((warn_unused_result));

/* STORE_NOT_FOUND where there was nothing. */
int kv_delete(struct kv_txn *txn, unsigned table, struct kv_bytes key, struct store_error *error)
    __attribute__((warn_unused_result));

/* The same for an entry whose contents stay, in another one: nothing is to be overwritten for it.
 */
int kv_take_out(struct kv_txn *txn, unsigned table, struct kv_bytes key, struct store_error *error)
    __attribute__((warn_unused_result));

/* Empties a table. */
int kv_clear(struct kv_txn *txn, unsigned table, struct store_error *error)
    __attribute__((warn_unused_result));

int kv_count(struct kv_txn *txn, unsigned table, uint64_t *ret_count, struct store_error *error)
    __attribute__((warn_unused_result));

/*
 * For a transaction that will change many pages, before it changes any: has it take free pages in
 * rising order. LMDB keeps what a transaction changes sorted, and takes free pages from one list
 * after the other, so that those of a second list go into the middle of what there is. It puts its
 * lists together on its way to pages that follow each other, as far as it has to: so this puts a
 * value that needs such, anew each time. `key` is for it alone. Measured with half a million tags:
 * storing takes a fourth less of the processor.
 */
int kv_gather_free_pages(struct kv_txn *txn, unsigned table, struct kv_bytes key,
                         struct store_error *error) __attribute__((warn_unused_result));

/* How many pages hold a table's entries; those above them are not counted. */
int kv_count_pages(struct kv_txn *txn, unsigned table, uint64_t *ret_count,
                   struct store_error *error) __attribute__((warn_unused_result));

/*
 * Calls `each` for the entries from `from` on (the first at or behind it; an empty key: the very
 * first), in the order of their keys, until it returns anything but 0, which is returned. `each`
 * may delete the entry it is called with, in a writing transaction, by kv_walk_delete.
 */
typedef int (*kv_each)(void *user, struct kv_cursor *at, struct kv_bytes key,
                       struct kv_bytes value);
int kv_walk(struct kv_txn *txn, unsigned table, struct kv_bytes from, kv_each each, void *user,
            struct store_error *error) __attribute__((warn_unused_result));
int kv_walk_delete(struct kv_cursor *at, struct store_error *error)
    __attribute__((warn_unused_result));

/*
 * A cursor over a table, for as long as its transaction, which it must be closed before. kv_seek
 * goes to the first entry at or behind a key, kv_next to the one behind; STORE_NOT_FOUND at the
 * end.
 */
int kv_cursor_open(struct kv_txn *txn, unsigned table, struct kv_cursor **ret_cursor,
                   struct store_error *error) __attribute__((warn_unused_result));
void kv_cursor_close(struct kv_cursor *cursor);
int kv_seek(struct kv_cursor *cursor, struct kv_bytes from, struct kv_bytes *ret_key,
            struct kv_bytes *ret_value, struct store_error *error)
    __attribute__((warn_unused_result));
int kv_next(struct kv_cursor *cursor, struct kv_bytes *ret_key, struct kv_bytes *ret_value,
            struct store_error *error) __attribute__((warn_unused_result));

/* The entry with the greatest key; STORE_NOT_FOUND in an empty table. */
int kv_last(struct kv_txn *txn, unsigned table, struct kv_bytes *ret_key,
            struct kv_bytes *ret_value, struct store_error *error)
    __attribute__((warn_unused_result));

/*
 * Overwrites what belongs to nothing any more, so that what was deleted is gone from the file as
 * well: a round over the file, at most `most_pages` pages a call, with the writer's thread outside
 * a transaction. *ret_left says how many pages are left to do (at least 1 while another round is
 * due): call again, with other jobs in between, until it is 0; it stays as it was while a reader is
 * in the way. What is deleted during a round makes another one follow. Nothing was deleted since
 * the last round: *ret_left is 0 at once. As a round begins, new transactions wait for a moment (20
 * ms at most) until those that run have ended.
 */
int kv_scrub(struct kv *kv, size_t most_pages, size_t *ret_left, struct store_error *error)
    __attribute__((warn_unused_result));

/*
 * Looks through the pages of the file as of now, which LMDB trusts without a look: whether each
 * table's are its own, hold entries that are whole and in order, as many as its head says, and
 * whether any is in two tables' or in a table's and free. Each fault is told in a sentence;
 * STORE_OK however many there are. Reads the file, not the map: no damage ends the process. May run
 * beside a writer.
 */
typedef void (*kv_tell)(void *user, const char *sentence);
int kv_check_pages(struct kv *kv, kv_tell tell, void *user, struct store_error *error)
    __attribute__((warn_unused_result));

static inline struct kv_bytes kv_bytes_of(const void *data, size_t size)
{
    return (struct kv_bytes){.data = data, .size = size};
}

#endif
