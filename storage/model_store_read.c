#include <string.h>

#include "storage/model_store_private.h"

enum {
    LONGEST_LIST = 512 /* postings of a chunk */
};

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
    result = kv_get(txn, MODEL_META, model_store_head_key(), &value, error);
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
