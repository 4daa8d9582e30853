/* The stored model from one end to the other, for those who copy it. */
#include "storage/model_store_private.h"
#include "storage/model_view.h"

int model_view_head(struct model_view *view, struct model_store_head *ret_head,
                    struct store_error *error)
{
    return model_store_get_head(model_view_txn(view), ret_head, error);
}

struct word_walk {
    struct kv_txn *txn;
    int (*each)(void *user, const struct model_store_word *word);
    void *user;
    struct store_error *error;
};

static int give_word(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    (void)at;
    const struct word_walk *walk = user;
    struct model_store_word word;
    int result = model_store_read_word(walk->txn, key, value, &word, walk->error);
    return result == STORE_OK ? walk->each(walk->user, &word) : result;
}

int model_view_each_word(struct model_view *view,
                         int (*each)(void *user, const struct model_store_word *word), void *user,
                         struct store_error *error)
{
    struct word_walk walk = {
        .txn = model_view_txn(view), .each = each, .user = user, .error = error};
    return kv_walk(model_view_txn(view), MODEL_WORDS, kv_bytes_of(NULL, 0), give_word, &walk,
                   error);
}

struct chunk_walk {
    struct model_view *view;
    int (*each)(void *user, const struct model_store_chunk *chunk);
    void *user;
    struct store_error *error;
};

/* What is new of a chunk lies elsewhere, so it is read by its key. */
static int give_chunk(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    (void)at;
    (void)value;
    const struct chunk_walk *walk = user;
    struct model_store_chunk chunk = {.word = codec_u32_of_key(key.data),
                                      .number =
                                          codec_u32_of_key((const unsigned char *)key.data + 4)};
    int result = model_view_chunk(walk->view, chunk.word, chunk.number, &chunk.bytes, walk->error);
    return result == STORE_OK ? walk->each(walk->user, &chunk) : result;
}

int model_view_each_chunk(struct model_view *view,
                          int (*each)(void *user, const struct model_store_chunk *chunk),
                          void *user, struct store_error *error)
{
    struct chunk_walk walk = {.view = view, .each = each, .user = user, .error = error};
    return kv_walk(model_view_txn(view), MODEL_CHUNKS, kv_bytes_of(NULL, 0), give_chunk, &walk,
                   error);
}
