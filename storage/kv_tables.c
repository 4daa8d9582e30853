/*
 * The names of an environment's tables stand in a page like any other. Where one of them is
 * damaged, its table looks as if it had never been made, and an empty one would take its place.
 */
#include <string.h>

#include "storage/kv_private.h"

/* What the table of tables has. */
struct listing {
    bool has[KV_TABLES]; /* of ours, by place */
    size_t entries;
    size_t unknown;
};

static int find(const char *const *names, unsigned count, const MDB_val *name)
{
    for (unsigned i = 0; i < count; i++) {
        if (strlen(names[i]) == name->mv_size &&
            memcmp(names[i], name->mv_data, name->mv_size) == 0) {
            return (int)i;
        }
    }
    return -1;
}

static void note_name(const struct kv *kv, const MDB_val *name, struct listing *listing)
{
    int place = find(kv->names, kv->table_count, name);
    listing->entries++;
    if (place >= 0) {
        listing->has[place] = true;
    } else if (find(kv->earlier_names, kv->earlier_count, name) < 0) {
        listing->unknown++;
    }
}

/* LMDB's code; the cursor ends with its walk. */
static int read_names(const struct kv *kv, MDB_txn *txn, MDB_dbi list, struct listing *listing)
{
    MDB_cursor *cursor = NULL;
    MDB_val name;
    int code = mdb_cursor_open(txn, list, &cursor);
    if (code != MDB_SUCCESS) {
        return code;
    }
    while ((code = mdb_cursor_get(cursor, &name, NULL, MDB_NEXT)) == MDB_SUCCESS) {
        note_name(kv, &name, listing);
    }
    mdb_cursor_close(cursor);
    return code == MDB_NOTFOUND ? MDB_SUCCESS : code;
}

/* An older version has made fewer tables, a newer one more: but none does both. */
static bool are_whole(const struct kv *kv, const struct listing *listing, size_t expected)
{
    unsigned missing = 0;
    for (unsigned i = 0; i < kv->table_count; i++) {
        missing += !listing->has[i];
    }
    return listing->entries == expected && (missing == 0 || listing->unknown == 0);
}

static int look_at_names(const struct kv *kv, MDB_txn *txn)
{
    struct listing listing = {0};
    MDB_dbi list = 0;
    MDB_stat stat;
    int code = mdb_dbi_open(txn, NULL, 0, &list);
    if (code == MDB_SUCCESS) {
        code = mdb_stat(txn, list, &stat);
    }
    if (code == MDB_SUCCESS) {
        code = read_names(kv, txn, list, &listing);
    }
    if (code == MDB_SUCCESS && !are_whole(kv, &listing, stat.ms_entries)) {
        code = MDB_CORRUPTED;
    }
    return code;
}

int kv_open_tables(struct kv *kv, struct store_error *error)
{
    MDB_txn *txn = NULL;
    int code = mdb_txn_begin(kv->env, NULL, kv->read_only ? MDB_RDONLY : 0, &txn);
    if (code == MDB_SUCCESS) {
        code = look_at_names(kv, txn);
    }
    for (unsigned i = 0; i < kv->table_count && code == MDB_SUCCESS; i++) {
        code = mdb_dbi_open(txn, kv->names[i], kv->read_only ? 0 : MDB_CREATE, &kv->tables[i]);
    }
    if (code == MDB_INCOMPATIBLE) { /* an entry of the list that is no table */
        code = MDB_CORRUPTED;
    }
    if (code == MDB_SUCCESS) {
        code = mdb_txn_commit(txn);
        txn = NULL;
    }
    if (txn) {
        mdb_txn_abort(txn);
    }
    return kv_translate(kv, code, "opening its tables", error);
}
