/*
 * A damaged model store: words, chunks of postings, tags, figures and entries are read as they were
 * put, or refused.
 *
 * Input: damage, in steps of a table, an entry, a byte of it and a mask (0 cuts it there). It is
 * committed, all is read, and it is repaired.
 */
#include "storage/model_store_private.h"
#include "storage/model_view.h"

#include "tests/fuzz/home.h"

enum {
    STEPS_MOST = 4,
    EACH = 4, /* of everything */
    VALUES = 3,
    CHUNK_BYTES = 160 * 12
};

static const char *const TERM[EACH] = {"fog", "bell", "fog bell", "desk=harbour"};

struct world {
    char home[HOME_BYTES];
    struct model_store *store;
};

static struct world world;

/* --- what is there: everything follows from its number --- */

static struct model_store_word word_of(uint32_t number)
{
    return (struct model_store_word){.term = TERM[number],
                                     .term_bytes = strlen(TERM[number]),
                                     .number = number,
                                     .count = 7 * number};
}

static void fill_chunk(uint32_t number, unsigned char bytes[CHUNK_BYTES])
{
    for (size_t i = 0; i < CHUNK_BYTES; i++) {
        bytes[i] = (unsigned char)(i * 31 + number);
    }
}

static struct model_store_tag tag_of(uint32_t number)
{
    return (struct model_store_tag){
        .number = number, .count = 9, .unprompted = 8, .bias = 0.5F, .last_count = number};
}

static void fill_figures(uint32_t number, double values[VALUES])
{
    for (size_t i = 0; i < VALUES; i++) {
        values[i] = number + 0.5 * (double)i;
    }
}

static const uint32_t ENTRY_TAGS[] = {1, 2, 3, 1911};
static const float ENTRY_VALUES[] = {0.5F, 0.25F, 1.5F, -2.0F, 3.0F, 4.0F, 5.0F, 6.0F};

static struct model_store_entry entry_of(uint32_t number)
{
    return (struct model_store_entry){
        .number = number,
        .scored = 3,
        .counted = number,
        .promise = 0.75F,
        .gaps = {.count = number, .tags = ENTRY_TAGS, .values = ENTRY_VALUES},
        .pairs = {.count = EACH - number, .tags = ENTRY_TAGS, .values = ENTRY_VALUES}};
}

static int put_one(struct model_store_writing *writing, uint32_t number, struct store_error *error)
{
    unsigned char bytes[CHUNK_BYTES];
    double values[VALUES];
    struct model_store_word word = word_of(number);
    struct model_store_tag tag = tag_of(number);
    struct model_store_entry entry = entry_of(number);
    fill_chunk(number, bytes);
    fill_figures(number, values);
    const struct model_store_chunk chunk = {
        .word = number / 2, .number = number % 2, .bytes = {bytes, CHUNK_BYTES}};
    const struct model_store_figures figures = {
        .kind = 2, .number = number, .count = VALUES, .values = values};
    int code = model_store_put_word(writing, &word, error);
    bytes[0] ^= 1U; /* what it was: see put_news */
    code |= model_store_put_chunk(writing, &chunk, error);
    code |= model_store_put_tag(writing, &tag, error);
    code |= model_store_put_figures(writing, &figures, error);
    code |= model_store_put_entry(writing, &entry, error);
    return code;
}

/* What the chunks are, as news of them. */
static void put_news(void)
{
    struct store_error error = {0};
    struct kv_txn *txn = NULL;
    unsigned char bytes[CHUNK_BYTES];
    unsigned char key[MODEL_CHUNKS_KEY];
    FUZZ_NEED(kv_begin(world.store->kv, true, &txn, &error) == STORE_OK, error.text);
    for (uint32_t number = 0; number < EACH; number++) {
        fill_chunk(number, bytes);
        codec_key_u32(key, number / 2);
        codec_key_u32(key + 4, number % 2);
        int code = model_chunks_put(txn, kv_bytes_of(key, sizeof key),
                                    kv_bytes_of(bytes, sizeof bytes), false, &error);
        FUZZ_NEED(code == STORE_OK, error.text);
    }
    FUZZ_NEED(kv_commit(txn, &error) == STORE_OK, error.text);
}

static void put_all(void)
{
    struct store_error error = {0};
    struct model_store_writing *writing = NULL;
    const struct model_store_head head = {.settings = "step = 0", .learned = 1911};
    int code = model_store_begin(world.store, &writing, &error);
    FUZZ_NEED(code == STORE_OK, error.text);
    code = model_store_clear(writing, &error);
    code |= model_store_put_head(writing, &head, &error);
    for (uint32_t number = 0; number < EACH; number++) {
        code |= put_one(writing, number, &error);
    }
    FUZZ_NEED(code == STORE_OK, error.text);
    FUZZ_NEED(model_store_commit(writing, &error) == STORE_OK, error.text);
    put_news();
}

static void open_world(void)
{
    struct store_error error = {0};
    home_make(world.home);
    const struct store_settings settings = {.home = world.home, .map_bytes = HOME_MAP_BYTES};
    FUZZ_NEED(model_store_open(&settings, &world.store, &error) == STORE_OK, error.text);
    put_all();
}

static void close_world(void)
{
    model_store_close(world.store);
    home_remove(world.home);
}

/* --- damage --- */

struct entry {
    size_t left;
    struct codec_writer key;
    struct codec_writer value;
};

static int take_entry(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    struct entry *entry = user;
    (void)at;
    codec_reset(&entry->key);
    codec_reset(&entry->value);
    codec_put_raw(&entry->key, key.data, key.size);
    codec_put_raw(&entry->value, value.data, value.size);
    return entry->left-- > 0 ? STORE_OK : STORE_STOPPED;
}

static void damage(struct kv_txn *txn, struct fuzz_input *input)
{
    unsigned table = fuzz_byte(input) % MODEL_TABLES;
    struct entry entry = {.left = fuzz_byte(input) % EACH};
    struct store_error error = {0};
    int code = kv_walk(txn, table, kv_bytes_of(NULL, 0), take_entry, &entry, &error);
    FUZZ_CHECK(code == STORE_OK || code == STORE_STOPPED);
    size_t at = fuzz_byte(input) | (size_t)fuzz_byte(input) << 8U;
    uint8_t mask = fuzz_byte(input);
    if (entry.value.size > 0) {
        at %= entry.value.size;
        entry.value.data[at] ^= mask;
        entry.value.size = mask != 0 ? entry.value.size : at;
        code = kv_put(txn, table, kv_bytes_of(entry.key.data, entry.key.size),
                      kv_bytes_of(entry.value.data, entry.value.size), &error);
        FUZZ_NEED(code == STORE_OK, error.text);
    }
    codec_deinit(&entry.key);
    codec_deinit(&entry.value);
}

/* --- what must hold then --- */

static bool is_read(int code, const struct store_error *error)
{
    FUZZ_CHECK(code == STORE_OK || code == STORE_CORRUPT);
    FUZZ_CHECK(code == STORE_OK || fuzz_is_sentence(error->text));
    return code == STORE_OK;
}

static bool are_same(const float *left, const float *right, size_t count)
{
    for (size_t i = 0; i < count; i++) {
        if (!(left[i] >= right[i] && left[i] <= right[i])) { /* nor when one is no number */
            return false;
        }
    }
    return true;
}

static void check_tagged(const struct model_store_tagged *found,
                         const struct model_store_tagged *due, size_t values_each)
{
    FUZZ_CHECK(found->count == due->count);
    FUZZ_CHECK(memcmp(found->tags, due->tags, due->count * sizeof *due->tags) == 0);
    FUZZ_CHECK(are_same(found->values, due->values, due->count * values_each));
}

static void check_entry(const struct model_store_entry *found, uint32_t number)
{
    struct model_store_entry due = entry_of(number);
    FUZZ_CHECK(found->number == number && found->scored == due.scored);
    FUZZ_CHECK(found->counted == due.counted && are_same(&found->promise, &due.promise, 1));
    check_tagged(&found->gaps, &due.gaps, MODEL_STORE_GAP_VALUES);
    check_tagged(&found->pairs, &due.pairs, MODEL_STORE_PAIR_VALUES);
}

static void check_one(struct model_view *view, uint32_t number)
{
    struct store_error error = {0};
    struct model_store_word word = word_of(number);
    struct model_store_word found = {0};
    int code = model_view_word(view, word.term, word.term_bytes, &found, &error);
    if (is_read(code, &error)) {
        FUZZ_CHECK(found.number == word.number && found.count == word.count);
    }
    unsigned char bytes[CHUNK_BYTES];
    struct kv_bytes chunk = {0};
    error = (struct store_error){0};
    code = model_view_chunk(view, number / 2, number % 2, &chunk, &error);
    if (is_read(code, &error)) {
        fill_chunk(number, bytes);
        FUZZ_CHECK(chunk.size == CHUNK_BYTES && memcmp(chunk.data, bytes, CHUNK_BYTES) == 0);
    }
    struct model_store_entry entry;
    error = (struct store_error){0};
    if (is_read(model_view_entry(view, number, &entry, &error), &error)) {
        check_entry(&entry, number);
    }
}

/* In their order, up to the first that is damaged. */
static void check_entries(struct model_view *view)
{
    struct store_error error = {0};
    struct model_store_entry entry = {.number = 0};
    for (uint32_t number = 1; number < EACH; number++) {
        if (!is_read(model_view_entry_after(view, entry.number, &entry, &error), &error)) {
            return;
        }
        check_entry(&entry, number);
    }
    FUZZ_CHECK(model_view_entry_after(view, entry.number, &entry, &error) == STORE_NOT_FOUND);
}

static int check_tag(void *user, const struct model_store_tag *tag)
{
    struct model_store_tag due = tag_of(tag->number);
    (void)user;
    FUZZ_CHECK(tag->number < EACH && tag->count == due.count &&
               are_same(&tag->bias, &due.bias, 1) && tag->unprompted == due.unprompted &&
               tag->last_count == due.last_count);
    return STORE_OK;
}

static int check_figures(void *user, const struct model_store_figures *figures)
{
    double values[VALUES];
    (void)user;
    fill_figures(figures->number, values);
    FUZZ_CHECK(figures->kind == 2 && figures->number < EACH && figures->count == VALUES);
    for (size_t i = 0; i < VALUES; i++) {
        FUZZ_CHECK(figures->values[i] >= values[i] && figures->values[i] <= values[i]);
    }
    return STORE_OK;
}

static void check_all(void)
{
    static const struct model_store_sink SINK = {.tag = check_tag, .figures = check_figures};
    struct store_error error = {0};
    struct model_view *view = NULL;
    FUZZ_NEED(model_view_open(world.store, &view, &error) == STORE_OK, error.text);
    for (uint32_t number = 0; number < EACH; number++) {
        check_one(view, number);
    }
    check_entries(view);
    (void)is_read(model_view_load(view, &SINK, &error), &error);
    model_view_close(view);
    /* The head has no checksum yet: it is only seen not to be read beyond. */
    struct model_store_head head;
    error = (struct store_error){0};
    int code = model_store_read_head(world.store, &head, &error);
    FUZZ_CHECK(code == STORE_OK || fuzz_is_sentence(error.text));
    FUZZ_CHECK(code != STORE_OK || memchr(head.settings, '\0', sizeof head.settings));
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    struct fuzz_input input = {.data = data, .size = size};
    struct store_error error = {0};
    struct kv_txn *txn = NULL;
    if (!world.store) {
        open_world();
        (void)atexit(close_world);
    }
    FUZZ_NEED(kv_begin(world.store->kv, true, &txn, &error) == STORE_OK, error.text);
    for (int i = 0; i < STEPS_MOST && input.size > 0; i++) {
        damage(txn, &input);
    }
    FUZZ_NEED(kv_commit(txn, &error) == STORE_OK, error.text);
    check_all();
    put_all();
    return 0;
}

uint8_t *fuzz_made(size_t number, size_t *ret_size)
{
    (void)number;
    (void)ret_size;
    return NULL;
}
