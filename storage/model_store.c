#include "storage/model_store.h"

#include <limits.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "storage/kv_batch.h"
#include "storage/model_store_private.h"

enum {
    LARGE_CHUNKS = 4096 /* a writing of as many changes thousands of pages */
};

static const char *const TABLE_NAMES[MODEL_TABLES] = {
    [MODEL_META] = "meta",     [MODEL_WORDS] = "words",     [MODEL_CHUNKS] = "chunks",
    [MODEL_TAGS] = "tags",     [MODEL_FIGURES] = "figures", [MODEL_ENTRIES] = "worklist",
    [MODEL_COUNTS] = "counts", [MODEL_NEWS] = "news",
};

/* Of the formats 1 and 2. */
static const char *const EARLIER_NAMES[] = {"bins", "shadow_chunks"};

const struct model_cells MODEL_CELLS_COUNTS = {
    .table = MODEL_COUNTS, .cell_bytes = 4, .to_a_record = 64, .what = "list of counts"};

const struct model_cells MODEL_CELLS_TAGS = {
    .table = MODEL_TAGS, .cell_bytes = 36, .to_a_record = 16, .what = "list of tags"};

struct model_store_writing {
    struct model_store *store;
    struct kv_batch *batch;
    uint64_t chunks; /* put */
    bool is_wide;    /* they are many; once it is looked at */
    bool is_looked_at;
    void (*moved)(void *user); /* may be NULL */
    void *moved_user;
    struct model_cells_changes counts;
    struct model_cells_changes tags;
    struct codec_writer record;
};

int model_store_open(const struct store_settings *settings, struct model_store **ret_store,
                     struct store_error *error)
{
    return model_store_open_in(settings, "model", ret_store, error);
}

int model_store_open_in(const struct store_settings *settings, const char *folder,
                        struct model_store **ret_store, struct store_error *error)
{
    char directory[PATH_MAX];
    int length = snprintf(directory, sizeof directory, "%s/%s", settings->home, folder);
    if (length < 0 || (size_t)length >= sizeof directory) {
        return store_fail(error, STORE_DENIED, "the path of the home is too long");
    }
    struct model_store *made = calloc(1, sizeof *made);
    if (!made) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    struct kv_settings kv_settings = {.directory = directory,
                                      .map_bytes = settings->map_bytes,
                                      .reserve_bytes = settings->reserve_bytes,
                                      .tables = TABLE_NAMES,
                                      .table_count = MODEL_TABLES,
                                      .earlier_tables = EARLIER_NAMES,
                                      .earlier_count =
                                          sizeof EARLIER_NAMES / sizeof EARLIER_NAMES[0],
                                      .read_only = settings->read_only,
                                      .is_alone = settings->is_alone};
    int result = kv_open(&kv_settings, &made->kv, error);
    if (result != STORE_OK) {
        free(made);
        return result;
    }
    *ret_store = made;
    return STORE_OK;
}

void model_store_close(struct model_store *store)
{
    if (store) {
        kv_close(store->kv);
        free(store);
    }
}

bool model_store_is_broken(const struct model_store *store)
{
    return kv_is_broken(store->kv);
}

uint64_t model_store_file_bytes(const struct model_store *store)
{
    return kv_file_bytes(store->kv);
}

int model_store_copy(struct model_store *store, kv_take take, void *user, struct store_error *error)
{
    return kv_copy(store->kv, take, user, error);
}

int model_store_copy_bytes(struct model_store *store, uint64_t *ret_bytes,
                           struct store_error *error)
{
    return kv_copy_bytes(store->kv, ret_bytes, error);
}

int model_store_check_pages(struct model_store *store, kv_tell tell, void *user,
                            struct store_error *error)
{
    return kv_check_pages(store->kv, tell, user, error);
}

/* --- writing -----------------------------------------------------------------------------------
 */

int model_store_begin(struct model_store *store, struct model_store_writing **ret_writing,
                      struct store_error *error)
{
    struct model_store_writing *made = calloc(1, sizeof *made);
    if (!made) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    made->store = store;
    made->counts.cells = &MODEL_CELLS_COUNTS;
    made->tags.cells = &MODEL_CELLS_TAGS;
    int result = kv_batch_new(&made->batch, error);
    if (result != STORE_OK) {
        free(made);
        return result;
    }
    *ret_writing = made;
    return STORE_OK;
}

/* What is only there to have free pages gathered. */
static struct kv_bytes run_key(void)
{
    return kv_bytes_of("run", 3);
}

static int gather_free_pages(void *user, struct kv_txn *txn, struct store_error *error)
{
    const struct model_store_writing *writing = user;
    return writing->chunks < LARGE_CHUNKS ? STORE_OK
                                          : kv_gather_free_pages(txn, MODEL_META, run_key(), error);
}

/* A chunk is collected without a checksum: there are many of them, and the thread that commits has
 * the time. */
static int put_chunk(void *user, struct kv_txn *txn, struct kv_bytes key, struct kv_bytes body,
                     struct store_error *error)
{
    struct model_store_writing *writing = user;
    if (!writing->is_looked_at) {
        int code = model_chunks_are_many(txn, writing->chunks, &writing->is_wide, error);
        if (code != STORE_OK) {
            return code;
        }
        writing->is_looked_at = true;
    }
    return model_chunks_put(txn, key, body, writing->is_wide, error);
}

static void tell_moved(void *user)
{
    struct model_store_writing *writing = user;
    if (writing->moved) {
        writing->moved(writing->moved_user);
    }
}

/* What comes behind the batch's own changes. */
static int make_rest(void *user, struct kv_txn *txn, struct store_error *error)
{
    struct model_store_writing *writing = user;
    int result = model_cells_make(&writing->counts, txn, error);
    tell_moved(writing);
    if (result == STORE_OK) {
        result = model_cells_make(&writing->tags, txn, error);
        tell_moved(writing);
    }
    return result == STORE_OK ? model_chunks_settle(txn, &writing->store->settled, error) : result;
}

int model_store_commit(struct model_store_writing *writing, struct store_error *error)
{
    const struct kv_batch_steps steps = {.user = writing,
                                         .first = gather_free_pages,
                                         .put_in = MODEL_CHUNKS,
                                         .put = put_chunk,
                                         .moved = tell_moved,
                                         .last = make_rest};
    int result = kv_batch_commit(writing->batch, writing->store->kv, &steps, error);
    model_store_abort(writing);
    return result;
}

void model_store_watch(struct model_store_writing *writing, void (*moved)(void *user), void *user)
{
    writing->moved = moved;
    writing->moved_user = user;
}

void model_store_abort(struct model_store_writing *writing)
{
    if (writing) {
        kv_batch_free(writing->batch);
        model_cells_deinit(&writing->counts);
        model_cells_deinit(&writing->tags);
        codec_deinit(&writing->record);
        free(writing);
    }
}

int model_store_clear(struct model_store_writing *writing, struct store_error *error)
{
    for (unsigned table = 0; table < MODEL_TABLES; table++) {
        int result = kv_batch_delete_all(writing->batch, table, (struct kv_bytes){0}, error);
        if (result != STORE_OK) {
            return result;
        }
    }
    return STORE_OK;
}

int model_store_put_head(struct model_store_writing *writing, const struct model_store_head *head,
                         struct store_error *error)
{
    struct codec_writer *record = &writing->record;
    codec_reset(record);
    codec_put_u32(record, MODEL_STORE_FORMAT);
    codec_put_raw(record, head->store_uuid, STORE_UUID_BYTES);
    codec_put_u64(record, head->learned);
    codec_put_u64(record, head->documents);
    codec_put_u64(record, head->factor_count);
    codec_put_f64(record, head->factor_sum);
    codec_put_u64(record, head->latest);
    codec_put_u64(record, head->evidence_items);
    codec_put_u64(record, head->curves_items);
    codec_put_u64(record, head->fit_halves);
    codec_put_f64(record, head->evidence_gain);
    codec_put_u64(record, head->words);
    codec_put_u64(record, head->next_word);
    codec_put_u64(record, head->postings);
    codec_put_u64(record, head->pruned_unspecific);
    codec_put_u64(record, head->pruned_tiny);
    codec_put_u64(record, head->rehearsed);
    codec_put_u64(record, head->rehearsal_turns);
    codec_put_u64(record, head->rehearsals);
    codec_put_u64(record, head->rehearsed_items);
    codec_put_u64(record, head->examples);
    codec_put_blob(record, head->settings, strlen(head->settings));
    codec_put_u32(record, codec_checksum(record->data, record->size));
    if (record->failed) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    return kv_batch_put(writing->batch, MODEL_META, model_store_head_key(),
                        kv_bytes_of(record->data, record->size), error);
}

/* Begins a checked record: the checksum is filled in when it is put. */
static struct codec_writer *begin_record(struct model_store_writing *writing)
{
    codec_reset(&writing->record);
    codec_put_u32(&writing->record, 0);
    return &writing->record;
}

static int put_record(struct model_store_writing *writing, enum model_table table,
                      struct kv_bytes key, struct store_error *error)
{
    enum {
        CHECKSUM_BYTES = 4
    };
    struct codec_writer *record = &writing->record;
    if (record->failed) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    struct codec_writer checksum = {.data = record->data, .capacity = CHECKSUM_BYTES};
    codec_put_u32(&checksum,
                  codec_checksum_of_two(key.data, key.size, record->data + CHECKSUM_BYTES,
                                        record->size - CHECKSUM_BYTES));
    return kv_batch_put(writing->batch, table, key, kv_bytes_of(record->data, record->size), error);
}

int model_store_put_word(struct model_store_writing *writing, const struct model_store_word *word,
                         struct store_error *error)
{
    struct codec_writer *record = begin_record(writing);
    codec_put_u32(record, word->number);
    int result = put_record(writing, MODEL_WORDS, kv_bytes_of(word->term, word->term_bytes), error);
    return result == STORE_OK ? model_store_put_count(writing, word->number, word->count, error)
                              : result;
}

int model_store_put_count(struct model_store_writing *writing, uint32_t number, uint32_t count,
                          struct store_error *error)
{
    unsigned char bytes[4];
    struct codec_writer cell = {.data = bytes, .capacity = sizeof bytes};
    codec_put_u32(&cell, count);
    return model_cells_note(&writing->counts, number, bytes, error);
}

int model_store_remove_chunk(struct model_store_writing *writing, uint32_t word, uint32_t number,
                             struct store_error *error)
{
    unsigned char key[8];
    codec_key_u32(key, word);
    codec_key_u32(key + 4, number);
    int result = kv_batch_delete(writing->batch, MODEL_CHUNKS, kv_bytes_of(key, sizeof key), error);
    return result == STORE_OK
               ? kv_batch_delete(writing->batch, MODEL_NEWS, kv_bytes_of(key, sizeof key), error)
               : result;
}

int model_store_forget_word(struct model_store_writing *writing,
                            const struct model_store_word *word, struct store_error *error)
{
    unsigned char beginning[4];
    codec_key_u32(beginning, word->number);
    int result = kv_batch_delete(writing->batch, MODEL_WORDS,
                                 kv_bytes_of(word->term, word->term_bytes), error);
    if (result == STORE_OK) {
        result = model_cells_note(&writing->counts, word->number, NULL, error);
    }
    const enum model_table tables[] = {MODEL_CHUNKS, MODEL_NEWS};
    for (size_t i = 0; i < sizeof tables / sizeof tables[0] && result == STORE_OK; i++) {
        result = kv_batch_delete_all(writing->batch, tables[i],
                                     kv_bytes_of(beginning, sizeof beginning), error);
    }
    return result;
}

int model_store_put_chunk(struct model_store_writing *writing,
                          const struct model_store_chunk *chunk, struct store_error *error)
{
    unsigned char key[8];
    codec_key_u32(key, chunk->word);
    codec_key_u32(key + 4, chunk->number);
    writing->chunks++;
    return kv_batch_put(writing->batch, MODEL_CHUNKS, kv_bytes_of(key, sizeof key), chunk->bytes,
                        error);
}

int model_store_put_tag(struct model_store_writing *writing, const struct model_store_tag *tag,
                        struct store_error *error)
{
    unsigned char bytes[MODEL_CELLS_MOST_BYTES];
    struct codec_writer cell = {.data = bytes, .capacity = sizeof bytes};
    codec_put_u32(&cell, tag->count);
    codec_put_u32(&cell, tag->unprompted);
    codec_put_u32(&cell, tag->trial_halves);
    codec_put_u32(&cell, tag->given_halves);
    codec_put_f32(&cell, tag->bias);
    codec_put_f32(&cell, tag->bias_accumulator);
    codec_put_f32(&cell, tag->shadow_bias);
    codec_put_f32(&cell, tag->shadow_bias_accumulator);
    codec_put_u32(&cell, tag->last_count);
    return model_cells_note(&writing->tags, tag->number, bytes, error);
}

int model_store_put_figures(struct model_store_writing *writing,
                            const struct model_store_figures *figures, struct store_error *error)
{
    struct codec_writer *record = begin_record(writing);
    codec_put_u32(record, figures->count);
    for (uint32_t i = 0; i < figures->count; i++) {
        codec_put_f64(record, figures->values[i]);
    }
    unsigned char key[8];
    codec_key_u32(key, figures->kind);
    codec_key_u32(key + 4, figures->number);
    return put_record(writing, MODEL_FIGURES, kv_bytes_of(key, sizeof key), error);
}

static void put_tagged(struct codec_writer *record, const struct model_store_tagged *tagged,
                       uint32_t values_each)
{
    codec_put_u32(record, tagged->count);
    for (uint32_t i = 0; i < tagged->count; i++) {
        codec_put_u32(record, tagged->tags[i]);
        for (uint32_t j = 0; j < values_each; j++) {
            codec_put_f32(record, tagged->values[i * values_each + j]);
        }
    }
}

int model_store_put_entry(struct model_store_writing *writing,
                          const struct model_store_entry *entry, struct store_error *error)
{
    struct codec_writer *record = begin_record(writing);
    codec_put_u64(record, entry->scored);
    codec_put_u64(record, entry->counted);
    codec_put_f32(record, entry->promise);
    put_tagged(record, &entry->gaps, MODEL_STORE_GAP_VALUES);
    put_tagged(record, &entry->pairs, MODEL_STORE_PAIR_VALUES);
    unsigned char key[8];
    codec_key_u64(key, entry->number);
    return put_record(writing, MODEL_ENTRIES, kv_bytes_of(key, sizeof key), error);
}

int model_store_remove_entry(struct model_store_writing *writing, uint64_t number,
                             struct store_error *error)
{
    unsigned char key[8];
    codec_key_u64(key, number);
    return kv_batch_delete(writing->batch, MODEL_ENTRIES, kv_bytes_of(key, sizeof key), error);
}

int model_store_scrub(struct model_store *store, size_t most_pages, size_t *ret_left,
                      struct store_error *error)
{
    return kv_scrub(store->kv, most_pages, ret_left, error);
}
