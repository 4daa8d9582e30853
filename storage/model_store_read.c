#include <string.h>

#include "storage/model_store_private.h"
#include "storage/model_view.h"

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
    head.words = codec_get_u64(&reader);
    head.next_word = codec_get_u64(&reader);
    head.postings = codec_get_u64(&reader);
    head.pruned_unspecific = codec_get_u64(&reader);
    head.pruned_tiny = codec_get_u64(&reader);
    head.rehearsed = codec_get_u64(&reader);
    head.rehearsal_turns = codec_get_u64(&reader);
    head.rehearsals = codec_get_u64(&reader);
    head.rehearsed_items = codec_get_u64(&reader);
    head.examples = codec_get_u64(&reader);
    size_t bytes = 0;
    const char *settings = codec_get_blob(&reader, &bytes);
    uint32_t right = codec_checksum(reader.data, reader.at);
    if (codec_get_u32(&reader) != right || reader.failed || format == 0 ||
        bytes >= sizeof head.settings) {
        return store_fail(error, STORE_CORRUPT, "the model's first record is damaged");
    }
    memcpy(head.settings, settings, bytes);
    *ret_head = head;
    return STORE_OK;
}

int model_store_get_head(struct kv_txn *txn, struct model_store_head *ret_head,
                         struct store_error *error)
{
    struct kv_bytes value = {0};
    int result = kv_get(txn, MODEL_META, model_store_head_key(), &value, error);
    return result == STORE_OK ? decode_head(value, ret_head, error) : result;
}

int model_store_read_head(struct model_store *store, struct model_store_head *ret_head,
                          struct store_error *error)
{
    struct kv_txn *txn = NULL;
    int result = kv_begin(store->kv, false, &txn, error);
    if (result != STORE_OK) {
        return result;
    }
    result = model_store_get_head(txn, ret_head, error);
    kv_abort(txn);
    return result;
}

struct loading {
    const struct model_store_sink *sink;
    struct store_error *error;
};

int model_store_open_record(struct kv_bytes key, struct kv_bytes value, const char *what,
                            struct codec_reader *ret_reader, struct store_error *error)
{
    struct codec_reader reader = {.data = value.data, .size = value.size};
    uint32_t checksum = codec_get_u32(&reader);
    if (reader.failed || codec_checksum_of_two(key.data, key.size, reader.data + reader.at,
                                               reader.size - reader.at) != checksum) {
        return store_fail(error, STORE_CORRUPT, "a stored %s of the model is damaged", what);
    }
    *ret_reader = reader;
    return STORE_OK;
}

static int load_tag(void *user, uint32_t number, const unsigned char *cell)
{
    const struct loading *loading = user;
    struct codec_reader reader = {.data = cell, .size = MODEL_CELLS_TAGS.cell_bytes};
    struct model_store_tag tag = {.number = number};
    tag.count = codec_get_u32(&reader);
    tag.unprompted = codec_get_u32(&reader);
    tag.trial_halves = codec_get_u32(&reader);
    tag.given_halves = codec_get_u32(&reader);
    tag.bias = codec_get_f32(&reader);
    tag.bias_accumulator = codec_get_f32(&reader);
    tag.shadow_bias = codec_get_f32(&reader);
    tag.shadow_bias_accumulator = codec_get_f32(&reader);
    tag.last_count = codec_get_u32(&reader);
    return loading->sink->tag(loading->sink->user, &tag);
}

static int load_tags(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    (void)at;
    const struct loading *loading = user;
    return model_cells_of_record(&MODEL_CELLS_TAGS, key, value, load_tag, user, loading->error);
}

static int load_figures(void *user, struct kv_cursor *at, struct kv_bytes key,
                        struct kv_bytes value)
{
    (void)at;
    const struct loading *loading = user;
    struct codec_reader reader;
    int result = model_store_open_record(key, value, "list of figures", &reader, loading->error);
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

int model_view_load(struct model_view *view, const struct model_store_sink *sink,
                    struct store_error *error)
{
    static const struct {
        enum model_table table;
        kv_each each;
    } walks[] = {{MODEL_TAGS, load_tags}, {MODEL_FIGURES, load_figures}};
    struct loading loading = {.sink = sink, .error = error};
    int result = STORE_OK;
    for (size_t i = 0; i < sizeof walks / sizeof walks[0] && result == STORE_OK; i++) {
        result = kv_walk(model_view_txn(view), walks[i].table, kv_bytes_of(NULL, 0), walks[i].each,
                         &loading, error);
    }
    return result;
}
