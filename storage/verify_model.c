/*
 * Every record of the model against its checksum, and the words, chunks and entries against the
 * counts in its head. What the weights say cannot be verified: they can be learned again.
 */
#include <inttypes.h>
#include <stdlib.h>
#include <string.h>

#include "storage/model_store_private.h"
#include "storage/verify_private.h"

struct looking {
    const struct verify_origin *origin;
    const struct verify_sink *sink;
    struct verify_model_sums *sums;
    unsigned char *has_word;  /* by number, a bit each */
    unsigned char *has_count; /* likewise */
    struct kv_txn *txn;
    struct store_error *error;
    uint64_t counts;
    uint64_t news;
    uint64_t chunk_bytes;
    uint32_t word; /* of the chunk seen last */
    uint32_t next_chunk;
    bool has_chunk;
};

#define TELL(looking, ...) verify_tell((looking)->sink, &(looking)->sums->faults, __VA_ARGS__)

enum {
    WORD_BITS = 8
};

static bool open_record(struct kv_bytes key, struct kv_bytes value, struct codec_reader *ret_reader)
{
    struct store_error reason = {0};
    return model_store_open_record(key, value, "record", ret_reader, &reason) == STORE_OK;
}

static bool is_marked(const struct looking *looking, const unsigned char *marks, uint32_t number)
{
    return number < looking->sums->head.next_word &&
           (marks[number / WORD_BITS] >> (number % WORD_BITS) & 1U);
}

static void mark(unsigned char *marks, uint32_t number)
{
    marks[number / WORD_BITS] |= (unsigned char)(1U << (number % WORD_BITS));
}

static bool is_word(const struct looking *looking, uint32_t number)
{
    return is_marked(looking, looking->has_word, number);
}

/* --- a record of each table ---------------------------------------------------------------------
 */

static int check_count(void *user, uint32_t number, const unsigned char *cell)
{
    struct looking *looking = user;
    (void)cell;
    if (number >= looking->sums->head.next_word) {
        TELL(looking, "there is a count of word number %u, which is not given out yet", number);
        return STORE_OK;
    }
    mark(looking->has_count, number);
    looking->counts++;
    return STORE_OK;
}

/* The words of one record, or tags, and what is told of one that is damaged. */
static int check_cells(struct looking *looking, const struct model_cells *cells,
                       struct kv_bytes key, struct kv_bytes value, model_cells_each each)
{
    struct store_error reason = {0};
    if (model_cells_of_record(cells, key, value, each, looking, &reason) != STORE_OK) {
        uint32_t first = model_cells_first(cells, key);
        TELL(looking, "the model's %s of numbers %u to %u is damaged", cells->what, first,
             first + (uint32_t)cells->to_a_record - 1);
    }
    return STORE_OK;
}

static int check_counts(void *user, struct kv_cursor *at, struct kv_bytes key,
                        struct kv_bytes value)
{
    (void)at;
    return check_cells(user, &MODEL_CELLS_COUNTS, key, value, check_count);
}

static int check_word(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    struct looking *looking = user;
    struct codec_reader reader;
    (void)at;
    looking->sums->words++;
    if (!open_record(key, value, &reader)) {
        TELL(looking, "the word %.*s is damaged", (int)key.size, (const char *)key.data);
        return STORE_OK;
    }
    uint32_t number = codec_get_u32(&reader);
    if (number >= looking->sums->head.next_word || is_word(looking, number)) {
        TELL(looking, "the word %.*s has number %u, which is %s", (int)key.size,
             (const char *)key.data, number,
             number >= looking->sums->head.next_word ? "not given out yet" : "another word's");
        return STORE_OK;
    }
    if (!is_marked(looking, looking->has_count, number)) {
        TELL(looking, "the word %.*s has no count", (int)key.size, (const char *)key.data);
    }
    mark(looking->has_word, number);
    return STORE_OK;
}

/* What has changed of a chunk; no data: nothing. */
static int find_news(struct looking *looking, struct kv_bytes key, struct kv_bytes *ret_news,
                     struct store_error *error)
{
    int code = kv_get(looking->txn, MODEL_NEWS, key, ret_news, error);
    looking->news += code == STORE_OK ? 1 : 0;
    return code == STORE_NOT_FOUND ? STORE_OK : code;
}

static int check_chunk(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    struct looking *looking = user;
    unsigned char room[KV_VALUE_BYTES];
    struct codec_reader reader;
    struct kv_bytes news = {0};
    struct kv_bytes body = {0};
    struct store_error reason = {0};
    uint32_t word = codec_u32_of_key(key.data);
    uint32_t number = codec_u32_of_key((const unsigned char *)key.data + 4);
    uint32_t due = looking->has_chunk && looking->word == word ? looking->next_chunk : 0;
    (void)at;
    looking->sums->chunks++;
    looking->has_chunk = true;
    looking->word = word;
    looking->next_chunk = number + 1;
    int code = find_news(looking, key, &news, &reason);
    if (code != STORE_OK && !verify_is_fault(code)) {
        return store_fail(looking->error, reason.code, "%s", reason.text);
    }
    if (code != STORE_OK || !open_record(key, value, &reader) ||
        !model_chunks_open(key, value, news, room, &body)) {
        TELL(looking, "chunk %u of the weights of word number %u is damaged", number, word);
    } else if (!is_word(looking, word)) {
        TELL(looking, "chunk %u of the weights belongs to word number %u, which is not there",
             number, word);
    }
    if (number != due) {
        TELL(looking, "chunk %u of the weights of word number %u is missing", due, word);
    }
    looking->chunk_bytes += body.size;
    return STORE_OK;
}

static int check_tag(void *user, uint32_t number, const unsigned char *cell)
{
    struct looking *looking = user;
    (void)cell;
    if (number >= looking->origin->tags) {
        TELL(looking, "the model knows tag number %u, and the store does not", number);
    }
    return STORE_OK;
}

static int check_tags(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    (void)at;
    return check_cells(user, &MODEL_CELLS_TAGS, key, value, check_tag);
}

static int check_figures(void *user, struct kv_cursor *at, struct kv_bytes key,
                         struct kv_bytes value)
{
    struct looking *looking = user;
    struct codec_reader reader;
    (void)at;
    if (!open_record(key, value, &reader)) {
        TELL(looking, "list %u of the model's figures of kind %u is damaged",
             codec_u32_of_key((const unsigned char *)key.data + 4), codec_u32_of_key(key.data));
    }
    return STORE_OK;
}

static int check_entry(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    struct looking *looking = user;
    struct codec_reader reader;
    uint64_t number = codec_u64_of_key(key.data);
    (void)at;
    looking->sums->entries++;
    if (!open_record(key, value, &reader)) {
        TELL(looking, "the worklist's entry of change %" PRIu64 " is damaged", number);
    } else if (number > looking->sums->head.learned) {
        TELL(looking, "the worklist has an entry of change %" PRIu64 ", which is not learned yet",
             number);
    }
    return STORE_OK;
}

/* --- the head -----------------------------------------------------------------------------------
 */

static void check_head(struct looking *looking)
{
    const struct model_store_head *head = &looking->sums->head;
    if (memcmp(head->store_uuid, looking->origin->store_uuid, STORE_UUID_BYTES) != 0) {
        TELL(looking, "the model was learned from another store");
    }
    if (head->learned > looking->origin->last_seq) {
        TELL(looking, "the model has learned change %" PRIu64 ", and the store ends at %" PRIu64,
             head->learned, looking->origin->last_seq);
    }
}

/* A posting has four bytes for its tag and four for each lane, of which there are one or two. */
static void check_sums(struct looking *looking)
{
    const struct verify_model_sums *sums = looking->sums;
    if (sums->words != sums->head.words) {
        TELL(looking, "there are %" PRIu64 " words, and %" PRIu64 " on record", sums->words,
             sums->head.words);
    }
    if (looking->counts != sums->words) {
        TELL(looking, "there are %" PRIu64 " words, and counts of %" PRIu64, sums->words,
             looking->counts);
    }
    if (looking->chunk_bytes != 8 * sums->head.postings &&
        looking->chunk_bytes != 12 * sums->head.postings) {
        TELL(looking, "there are %" PRIu64 " bytes of weights, which %" PRIu64 " do not take",
             looking->chunk_bytes, sums->head.postings);
    }
}

/* --- all of it ----------------------------------------------------------------------------------
 */

/* Each of the news was met at its chunk. */
static int check_news(struct looking *looking, struct kv_txn *txn, struct store_error *error)
{
    uint64_t count = 0;
    int code = kv_count(txn, MODEL_NEWS, &count, error);
    if (code == STORE_OK && count != looking->news) {
        TELL(looking, "news of %" PRIu64 " chunks belong to none", count - looking->news);
    }
    return code;
}

static int look(struct looking *looking, struct kv_txn *txn, struct store_error *error)
{
    static const struct {
        enum model_table table;
        kv_each check;
    } WALKS[] = {{MODEL_COUNTS, check_counts},   {MODEL_WORDS, check_word},
                 {MODEL_CHUNKS, check_chunk},    {MODEL_TAGS, check_tags},
                 {MODEL_FIGURES, check_figures}, {MODEL_ENTRIES, check_entry}};
    int code = STORE_OK;
    for (size_t i = 0; i < sizeof WALKS / sizeof WALKS[0] && code == STORE_OK; i++) {
        code = kv_walk(txn, WALKS[i].table, (struct kv_bytes){0}, WALKS[i].check, looking, error);
    }
    return code == STORE_OK ? check_news(looking, txn, error) : code;
}

int verify_model(struct model_store *store, const struct verify_origin *origin,
                 const struct verify_sink *sink, struct verify_model_sums *ret_sums,
                 struct store_error *error)
{
    struct looking looking = {.origin = origin, .sink = sink, .sums = ret_sums, .error = error};
    struct kv_txn *txn = NULL;
    *ret_sums = (struct verify_model_sums){0};
    int code = verify_pages(store->kv, sink, &ret_sums->faults, error);
    if (code != STORE_OK || ret_sums->faults > 0) {
        return code;
    }
    code = kv_begin(store->kv, false, &txn, error);
    if (code != STORE_OK) {
        return code;
    }
    code = model_store_get_head(txn, &ret_sums->head, error);
    if (code == STORE_OK && ret_sums->head.settings[0] == '\0') {
        code = STORE_NOT_FOUND; /* of an earlier format, which nobody reads */
    }
    if (code != STORE_OK) {
        goto end;
    }
    looking.has_word = calloc(1, ret_sums->head.next_word / WORD_BITS + 1);
    looking.has_count = calloc(1, ret_sums->head.next_word / WORD_BITS + 1);
    if (!looking.has_word || !looking.has_count) {
        code = store_fail(error, STORE_NO_MEMORY, "out of memory");
        goto end;
    }
    looking.txn = txn;
    check_head(&looking);
    code = look(&looking, txn, error);
    if (code == STORE_OK) {
        check_sums(&looking);
    }
end:
    free(looking.has_word);
    free(looking.has_count);
    kv_abort(txn);
    return code;
}
