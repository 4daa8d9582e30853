/*
 * kv_private: the insides of an environment, for the files that know LMDB: kv.c, kv_copy.c,
 * kv_cursor.c, kv_pages.c, kv_scrub.c and kv_tables.c.
 */
#ifndef UNDERTAG_KV_PRIVATE_H
#define UNDERTAG_KV_PRIVATE_H

#include <lmdb.h>
#include <pthread.h>
#include <stdatomic.h>
#include <stdbool.h>
#include <string.h>

#include "storage/kv.h"

/* How far a round of scrubbing has come; the writer's thread alone. */
struct kv_round {
    bool due;    /* something was deleted since the last round began, or nobody knows */
    size_t next; /* the page to go on with; equal to `end` while no round is on */
    size_t end;
};

struct kv {
    char *directory;
    size_t map_bytes;
    size_t reserve_bytes;
    const char *const *names;
    unsigned table_count;
    const char *const *earlier_names;
    unsigned earlier_count;
    bool read_only;
    bool is_alone;
    MDB_dbi tables[KV_TABLES];
    bool is_open;       /* kv_open has succeeded: a failure now is one of its use */
    atomic_bool broken; /* a write failed in a way that leaves the file in doubt */
    struct kv_round round;
    pthread_mutex_t gate; /* over the four below */
    pthread_cond_t moved; /* one of the two last has changed */
    MDB_env *env;         /* NULL only after it could not be opened again */
    size_t running;       /* transactions; the environment is closed only while there are none */
    bool is_shut;         /* new transactions wait */
    size_t copies;        /* being made: they take long, and nobody waits for their end */
};

struct kv_txn {
    struct kv *kv;
    MDB_txn *txn;
    bool write;
    bool is_panic; /* it could not begin, since LMDB lets nobody in */
    bool deletes;  /* what it deleted is to be scrubbed once it is committed */
};

static inline MDB_val kv_to_val(struct kv_bytes bytes)
{
    MDB_val val = {.mv_size = bytes.size};
    memcpy(&val.mv_data, &bytes.data, sizeof val.mv_data); /* it takes no const, but only reads */
    return val;
}

static inline struct kv_bytes kv_from_val(MDB_val value)
{
    return kv_bytes_of(value.mv_data, value.mv_size);
}

/* Translates an LMDB code or an errno, once, here. `doing` goes into the sentence. */
int kv_translate(const struct kv *kv, int code, const char *doing, struct store_error *error);

/* Somebody is in the environment, which stays open until he leaves. Waits while it is shut. */
int kv_enter(struct kv *kv, bool write, struct store_error *error)
    __attribute__((warn_unused_result));
void kv_leave(struct kv *kv);

/* Opens the environment and its tables; on failure there is none. The gate is the caller's. */
int kv_open_environment(struct kv *kv, struct store_error *error)
    __attribute__((warn_unused_result));

/* Opens the tables of an open environment, or makes them. STORE_CORRUPT: the list of their names is
 * damaged; STORE_NOT_FOUND: read-only, and one was never made. */
int kv_open_tables(struct kv *kv, struct store_error *error) __attribute__((warn_unused_result));

/* Closes the environment and opens it again; false where a transaction was in the way for a moment,
 * or where it could not be opened. Outside a transaction and the gate. */
bool kv_open_anew(struct kv *kv) __attribute__((warn_unused_result));

#endif
