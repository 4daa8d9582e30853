#include "storage/model_store.h"

#include <limits.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "storage/codec.h"
#include "storage/kv.h"

enum model_table {
    MODEL_META,
    MODEL_WORDS,
    MODEL_CHUNKS,
    MODEL_SHADOW_CHUNKS,
    MODEL_TAGS,
    MODEL_FIGURES,
    MODEL_ENTRIES,
    MODEL_TABLES
};

static const char *const TABLE_NAMES[MODEL_TABLES] = {
    [MODEL_META] = "meta",        [MODEL_WORDS] = "words",
    [MODEL_CHUNKS] = "chunks",    [MODEL_SHADOW_CHUNKS] = "shadow_chunks",
    [MODEL_TAGS] = "tags",        [MODEL_FIGURES] = "figures",
    [MODEL_ENTRIES] = "worklist",
};

static const char HEAD_KEY[] = "model";

enum {
    LONGEST_LIST = 512 /* postings of a chunk */
};

struct model_store {
    struct kv *kv;
};

struct model_store_writing {
    struct kv_txn *txn;
    struct codec_writer record;
};

static struct kv_bytes head_key(void)
{
    return kv_bytes_of(HEAD_KEY, sizeof HEAD_KEY - 1);
}

int model_store_open(const struct store_settings *settings, struct model_store **ret_store,
                     struct store_error *error)
{
    char directory[PATH_MAX];
    int length = snprintf(directory, sizeof directory, "%s/model", settings->home);
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
                                      .table_count = MODEL_TABLES};
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

uint64_t model_store_file_bytes(const struct model_store *store)
{
    return kv_file_bytes(store->kv);
}

/* --- reading -----------------------------------------------------------------------------------
 */

static int decode_head(struct kv_bytes value, struct model_store_head *ret_head,
                       struct store_error *error)
{
    struct codec_reader reader = {.data = value.data, .size = value.size};
    struct model_store_head head = {0};
    uint32_t format = codec_get_u32(&reader);
    if (!reader.failed && format > MODEL_STORE_FORMAT) {
        return store_fail(error, STORE_NEWER,
                          "the model was written by a newer version of undertag (format %u, this "
                          "version reads up to %d)",
                          format, MODEL_STORE_FORMAT);
    }
    if (!reader.failed && format > 0 && format < MODEL_STORE_FORMAT) {
        *ret_head = head;
        return STORE_OK;
    }
    for (size_t i = 0; i < STORE_UUID_BYTES; i++) {
        head.store_uuid[i] = codec_get_u8(&reader);
    }
    head.learned = codec_get_u64(&reader);
    head.documents = codec_get_u64(&reader);
    head.factor_count = codec_get_u64(&reader);
    head.factor_sum = codec_get_f64(&reader);
    head.latest = codec_get_u64(&reader);
    head.evidence_items = codec_get_u64(&reader);
    head.curves_items = codec_get_u64(&reader);
    head.fit_halves = codec_get_u64(&reader);
    head.evidence_gain = codec_get_f64(&reader);
    size_t bytes = 0;
    const char *settings = codec_get_blob(&reader, &bytes);
    if (reader.failed || format == 0 || bytes >= sizeof head.settings) {
        return store_fail(error, STORE_CORRUPT, "the model's first record is damaged");
    }
    memcpy(head.settings, settings, bytes);
    *ret_head = head;
    return STORE_OK;
}

int model_store_read_head(struct model_store *store, struct model_store_head *ret_head,
                          struct store_error *error)
{
    struct kv_txn *txn = NULL;
    int result = kv_begin(store->kv, false, &txn, error);
    if (result != STORE_OK) {
        return result;
    }
    struct kv_bytes value = {0};
    result = kv_get(txn, MODEL_META, head_key(), &value, error);
    if (result == STORE_OK) {
        result = decode_head(value, ret_head, error);
    }
    kv_abort(txn);
    return result;
}

struct loading {
    const struct model_store_sink *sink;
    struct store_error *error;
};

/* The body of a checked record: what follows its checksum. */
static int open_record(struct kv_bytes value, const char *what, struct codec_reader *ret_reader,
                       struct store_error *error)
{
    struct codec_reader reader = {.data = value.data, .size = value.size};
    uint32_t checksum = codec_get_u32(&reader);
    if (reader.failed ||
        codec_checksum(reader.data + reader.at, reader.size - reader.at) != checksum) {
        return store_fail(error, STORE_CORRUPT, "a stored %s of the model is damaged", what);
    }
    *ret_reader = reader;
    return STORE_OK;
}

static int load_word(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    (void)at;
    const struct loading *loading = user;
    struct codec_reader reader;
    int result = open_record(value, "word", &reader, loading->error);
    if (result != STORE_OK) {
        return result;
    }
    struct model_store_word word = {.term = key.data, .term_bytes = key.size};
    word.number = codec_get_u32(&reader);
    word.count = codec_get_u32(&reader);
    return loading->sink->word(loading->sink->user, &word);
}

static int load_weights(const struct loading *loading, bool is_shadow, struct kv_bytes key,
                        struct kv_bytes value)
{
    struct codec_reader reader;
    int result = open_record(value, "chunk", &reader, loading->error);
    if (result != STORE_OK) {
        return result;
    }
    uint32_t tags[LONGEST_LIST];
    float values[LONGEST_LIST];
    float accumulators[LONGEST_LIST];
    struct model_store_chunk chunk = {
        .is_shadow = is_shadow, .tags = tags, .values = values, .accumulators = accumulators};
    chunk.word = codec_u32_of_key(key.data);
    chunk.number = codec_u32_of_key((const unsigned char *)key.data + 4);
    chunk.count = codec_get_u32(&reader);
    for (uint32_t i = 0; i < chunk.count && i < LONGEST_LIST; i++) {
        tags[i] = codec_get_u32(&reader);
        values[i] = codec_get_f32(&reader);
        accumulators[i] = codec_get_f32(&reader);
    }
    if (reader.failed || chunk.count > LONGEST_LIST) {
        return store_fail(loading->error, STORE_CORRUPT, "a stored chunk of the model is damaged");
    }
    return loading->sink->chunk(loading->sink->user, &chunk);
}

static int load_chunk(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    (void)at;
    return load_weights(user, false, key, value);
}

static int load_shadow(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    (void)at;
    return load_weights(user, true, key, value);
}

static int load_tag(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    (void)at;
    const struct loading *loading = user;
    struct codec_reader reader;
    int result = open_record(value, "tag", &reader, loading->error);
    if (result != STORE_OK) {
        return result;
    }
    struct model_store_tag tag = {.number = codec_u32_of_key(key.data)};
    tag.count = codec_get_u32(&reader);
    tag.unprompted = codec_get_u32(&reader);
    tag.trial_halves = codec_get_u32(&reader);
    tag.given_halves = codec_get_u32(&reader);
    tag.bias = codec_get_f32(&reader);
    tag.bias_accumulator = codec_get_f32(&reader);
    tag.shadow_bias = codec_get_f32(&reader);
    tag.shadow_bias_accumulator = codec_get_f32(&reader);
    return loading->sink->tag(loading->sink->user, &tag);
}

static int load_figures(void *user, struct kv_cursor *at, struct kv_bytes key,
                        struct kv_bytes value)
{
    (void)at;
    const struct loading *loading = user;
    struct codec_reader reader;
    int result = open_record(value, "list of figures", &reader, loading->error);
    if (result != STORE_OK) {
        return result;
    }
    double values[MODEL_STORE_MOST_FIGURES];
    struct model_store_figures figures = {.values = values};
    figures.kind = codec_u32_of_key(key.data);
    figures.number = codec_u32_of_key((const unsigned char *)key.data + 4);
    figures.count = codec_get_u32(&reader);
    for (uint32_t i = 0; i < figures.count && i < MODEL_STORE_MOST_FIGURES; i++) {
        values[i] = codec_get_f64(&reader);
    }
    if (reader.failed || figures.count > MODEL_STORE_MOST_FIGURES) {
        return store_fail(loading->error, STORE_CORRUPT,
                          "a stored list of figures of the model is damaged");
    }
    return loading->sink->figures(loading->sink->user, &figures);
}

/* What an entry's list is read into. */
struct tagged_room {
    uint32_t tags[MODEL_STORE_ENTRY_TAGS];
    float values[MODEL_STORE_ENTRY_TAGS * MODEL_STORE_PAIR_VALUES];
};

static struct model_store_tagged get_tagged(struct codec_reader *reader, uint32_t values_each,
                                            struct tagged_room *room)
{
    uint32_t count = codec_get_u32(reader);
    if (count > MODEL_STORE_ENTRY_TAGS) {
        reader->failed = true;
        count = 0;
    }
    for (uint32_t i = 0; i < count; i++) {
        room->tags[i] = codec_get_u32(reader);
        for (uint32_t j = 0; j < values_each; j++) {
            room->values[i * values_each + j] = codec_get_f32(reader);
        }
    }
    return (struct model_store_tagged){.count = count, .tags = room->tags, .values = room->values};
}

static int load_entry(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    (void)at;
    const struct loading *loading = user;
    struct codec_reader reader;
    int result = open_record(value, "entry", &reader, loading->error);
    if (result != STORE_OK) {
        return result;
    }
    struct tagged_room gaps;
    struct tagged_room pairs;
    struct model_store_entry entry = {.number = codec_u64_of_key(key.data)};
    entry.scored = codec_get_u64(&reader);
    entry.counted = codec_get_u64(&reader);
    entry.promise = codec_get_f32(&reader);
    entry.gaps = get_tagged(&reader, MODEL_STORE_GAP_VALUES, &gaps);
    entry.pairs = get_tagged(&reader, MODEL_STORE_PAIR_VALUES, &pairs);
    if (reader.failed) {
        return store_fail(loading->error, STORE_CORRUPT, "a stored entry of the model is damaged");
    }
    return loading->sink->entry(loading->sink->user, &entry);
}

int model_store_load(struct model_store *store, const struct model_store_sink *sink,
                     struct store_error *error)
{
    static const struct {
        enum model_table table;
        kv_each each;
    } walks[] = {{MODEL_WORDS, load_word},           {MODEL_CHUNKS, load_chunk},
                 {MODEL_SHADOW_CHUNKS, load_shadow}, {MODEL_TAGS, load_tag},
                 {MODEL_FIGURES, load_figures},      {MODEL_ENTRIES, load_entry}};
    struct loading loading = {.sink = sink, .error = error};
    struct kv_txn *txn = NULL;
    int result = kv_begin(store->kv, false, &txn, error);
    if (result != STORE_OK) {
        return result;
    }
    for (size_t i = 0; i < sizeof walks / sizeof walks[0] && result == STORE_OK; i++) {
        result = kv_walk(txn, walks[i].table, kv_bytes_of(NULL, 0), walks[i].each, &loading, error);
    }
    kv_abort(txn);
    return result;
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
    int result = kv_begin(store->kv, true, &made->txn, error);
    if (result != STORE_OK) {
        free(made);
        return result;
    }
    *ret_writing = made;
    return STORE_OK;
}

int model_store_commit(struct model_store_writing *writing, struct store_error *error)
{
    int result = kv_commit(writing->txn, error);
    codec_deinit(&writing->record);
    free(writing);
    return result;
}

void model_store_abort(struct model_store_writing *writing)
{
    if (writing) {
        kv_abort(writing->txn);
        codec_deinit(&writing->record);
        free(writing);
    }
}

int model_store_clear(struct model_store_writing *writing, struct store_error *error)
{
    for (unsigned table = 0; table < MODEL_TABLES; table++) {
        int result = kv_clear(writing->txn, table, error);
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
    codec_put_blob(record, head->settings, strlen(head->settings));
    if (record->failed) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    return kv_put(writing->txn, MODEL_META, head_key(), kv_bytes_of(record->data, record->size),
                  error);
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
                  codec_checksum(record->data + CHECKSUM_BYTES, record->size - CHECKSUM_BYTES));
    return kv_put(writing->txn, table, key, kv_bytes_of(record->data, record->size), error);
}

int model_store_put_word(struct model_store_writing *writing, const struct model_store_word *word,
                         struct store_error *error)
{
    struct codec_writer *record = begin_record(writing);
    codec_put_u32(record, word->number);
    codec_put_u32(record, word->count);
    return put_record(writing, MODEL_WORDS, kv_bytes_of(word->term, word->term_bytes), error);
}

static int delete_chunks(struct model_store_writing *writing, enum model_table table, uint32_t word,
                         struct store_error *error)
{
    int result = STORE_OK;
    for (uint32_t number = 0; result == STORE_OK; number++) {
        unsigned char key[8];
        codec_key_u32(key, word);
        codec_key_u32(key + 4, number);
        result = kv_delete(writing->txn, table, kv_bytes_of(key, sizeof key), error);
    }
    return result == STORE_NOT_FOUND ? STORE_OK : result;
}

int model_store_forget_word(struct model_store_writing *writing,
                            const struct model_store_word *word, struct store_error *error)
{
    int result =
        kv_delete(writing->txn, MODEL_WORDS, kv_bytes_of(word->term, word->term_bytes), error);
    if (result == STORE_NOT_FOUND) {
        return STORE_OK; /* it came and went since the last flush */
    }
    if (result == STORE_OK) {
        result = delete_chunks(writing, MODEL_CHUNKS, word->number, error);
    }
    return result == STORE_OK ? delete_chunks(writing, MODEL_SHADOW_CHUNKS, word->number, error)
                              : result;
}

int model_store_put_chunk(struct model_store_writing *writing,
                          const struct model_store_chunk *chunk, struct store_error *error)
{
    struct codec_writer *record = begin_record(writing);
    codec_put_u32(record, chunk->count);
    for (uint32_t i = 0; i < chunk->count; i++) {
        codec_put_u32(record, chunk->tags[i]);
        codec_put_f32(record, chunk->values[i]);
        codec_put_f32(record, chunk->accumulators[i]);
    }
    unsigned char key[8];
    codec_key_u32(key, chunk->word);
    codec_key_u32(key + 4, chunk->number);
    return put_record(writing, chunk->is_shadow ? MODEL_SHADOW_CHUNKS : MODEL_CHUNKS,
                      kv_bytes_of(key, sizeof key), error);
}

int model_store_put_tag(struct model_store_writing *writing, const struct model_store_tag *tag,
                        struct store_error *error)
{
    struct codec_writer *record = begin_record(writing);
    codec_put_u32(record, tag->count);
    codec_put_u32(record, tag->unprompted);
    codec_put_u32(record, tag->trial_halves);
    codec_put_u32(record, tag->given_halves);
    codec_put_f32(record, tag->bias);
    codec_put_f32(record, tag->bias_accumulator);
    codec_put_f32(record, tag->shadow_bias);
    codec_put_f32(record, tag->shadow_bias_accumulator);
    unsigned char key[4];
    codec_key_u32(key, tag->number);
    return put_record(writing, MODEL_TAGS, kv_bytes_of(key, sizeof key), error);
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
    int result = kv_delete(writing->txn, MODEL_ENTRIES, kv_bytes_of(key, sizeof key), error);
    return result == STORE_NOT_FOUND ? STORE_OK : result;
}

int model_store_scrub(struct model_store *store, size_t most_pages, size_t *ret_left,
                      struct store_error *error)
{
    return kv_scrub(store->kv, most_pages, ret_left, error);
}
