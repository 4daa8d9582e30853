/*
 * The latest record of every id, then what was superseded and is not erased yet; together those are
 * all the records that there are. What the latest ones count is held against the counts on record.
 */
#include <inttypes.h>
#include <stdlib.h>
#include <string.h>

#include "storage/items_private.h"
#include "storage/proof.h"
#include "storage/store_private.h"
#include "storage/verify_private.h"
#include "storage/vocabulary.h"

struct looking {
    struct store_view *view;
    const struct verify_sink *sink;
    struct verify_store_sums *sums;
    struct item_buffer buffer;
    struct vocabulary_counts *counts; /* by tag, taken from the items */
    struct store_totals totals;       /* likewise */
    uint64_t ids;
    uint64_t superseded;
    struct store_error *error;
};

#define TELL(looking, ...) verify_tell((looking)->sink, &(looking)->sums->faults, __VA_ARGS__)

/* --- items --------------------------------------------------------------------------------------
 */

static bool is_same_text(struct store_text one, struct kv_bytes other)
{
    return one.size == other.size && memcmp(one.data, other.data, one.size) == 0;
}

/* What an id leads to. */
static int check_item(struct looking *looking, struct kv_bytes id, const struct id_entry *entry)
{
    struct item_record record;
    struct store_error reason = {0};
    int shown = (int)id.size;
    int code = items_read(looking->view, entry->seq, &looking->buffer, &record, &reason);
    if (verify_is_fault(code)) {
        TELL(looking, "item %.*s: the record of change %" PRIu64 " is %s", shown,
             (const char *)id.data, entry->seq, code == STORE_NOT_FOUND ? "missing" : "damaged");
        return STORE_OK;
    }
    if (code != STORE_OK) {
        return store_fail(looking->error, reason.code, "%s", reason.text);
    }
    if (!is_same_text(record.id, id) || item_is_withdrawn(&record) != entry->withdrawn) {
        TELL(looking, "item %.*s: change %" PRIu64 ", where it leads to, is not its own", shown,
             (const char *)id.data, entry->seq);
        return STORE_OK;
    }
    if (entry->withdrawn) {
        return STORE_OK;
    }
    code = item_tally_add(looking->counts, looking->sums->totals.tags, &record);
    if (code == STORE_NO_MEMORY) {
        return items_no_memory(looking->error);
    }
    if (code != STORE_OK) {
        TELL(looking, "item %.*s holds a tag that the vocabulary does not know", shown,
             (const char *)id.data);
    }
    item_tally_totals(&looking->totals, &record);
    return STORE_OK;
}

static int check_id(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    struct looking *looking = user;
    struct codec_reader reader = {.data = value.data, .size = value.size};
    struct id_entry entry = {.seq = codec_get_u64(&reader)};
    entry.withdrawn = codec_get_u8(&reader) != 0;
    (void)at;
    looking->ids++;
    if (!proof_holds(key, value, ID_ENTRY_BYTES)) {
        TELL(looking, "item %.*s: its entry is damaged", (int)key.size, (const char *)key.data);
        return STORE_OK;
    }
    return check_item(looking, key, &entry);
}

/* --- what was superseded ------------------------------------------------------------------------
 */

static int check_superseded(void *user, struct kv_cursor *at, struct kv_bytes key,
                            struct kv_bytes value)
{
    struct looking *looking = user;
    struct item_record record;
    struct store_error reason = {0};
    uint64_t successor = codec_u64_of_key(key.data);
    (void)at;
    looking->superseded++;
    if (!proof_holds(key, value, sizeof(uint64_t))) {
        TELL(looking, "what change %" PRIu64 " replaced is damaged", successor);
        return STORE_OK;
    }
    uint64_t replaced = codec_u64_of_key(value.data);
    int code = items_read(looking->view, replaced, &looking->buffer, &record, &reason);
    if (verify_is_fault(code)) {
        TELL(looking, "change %" PRIu64 ": the record that it took the place of is %s", successor,
             code == STORE_NOT_FOUND ? "missing" : "damaged");
        return STORE_OK;
    }
    return code == STORE_OK ? STORE_OK
                            : (int)store_fail(looking->error, reason.code, "%s", reason.text);
}

/* --- all records --------------------------------------------------------------------------------
 */

static int count_records(struct looking *looking)
{
    uint64_t seq = 0;
    uint64_t next = 0;
    int code = STORE_OK;
    while ((code = records_next(looking->view, seq + 1, &next, looking->error)) == STORE_OK) {
        if (next <= seq) {
            return store_fail(looking->error, STORE_CORRUPT, "the records are out of order");
        }
        seq = next;
        looking->sums->records++;
    }
    if (code != STORE_NOT_FOUND) {
        return code;
    }
    if (seq > looking->sums->totals.seq) {
        TELL(looking, "there is a record of change %" PRIu64 ", and the last change is %" PRIu64,
             seq, looking->sums->totals.seq);
    }
    if (looking->sums->records != looking->ids + looking->superseded) {
        TELL(looking,
             "there are %" PRIu64 " records, and %" PRIu64 " are known by their items or changes",
             looking->sums->records, looking->ids + looking->superseded);
    }
    return STORE_OK;
}

/* --- tags ---------------------------------------------------------------------------------------
 */

static int check_tag(struct looking *looking, uint32_t number)
{
    struct vocabulary_tag tag;
    struct vocabulary_tag named = {.number = UINT32_MAX};
    struct store_error reason = {0};
    int code = vocabulary_get(looking->view, number, &tag, &reason);
    if (verify_is_fault(code)) {
        TELL(looking, "the record of tag number %u is %s", number,
             code == STORE_NOT_FOUND ? "missing" : "damaged");
        return STORE_OK;
    }
    if (code == STORE_OK) {
        code = vocabulary_find(looking->view, tag.name, strlen(tag.name), &named, &reason);
    }
    if (code != STORE_OK && !verify_is_fault(code)) {
        return store_fail(looking->error, reason.code, "%s", reason.text);
    }
    if (named.number != number) {
        TELL(looking, "tag %s (number %u): its name does not lead to it", tag.name, number);
    }
    if (memcmp(&tag.counts, &looking->counts[number], sizeof tag.counts) != 0) {
        TELL(looking, "tag %s (number %u): its counts are not those of the items", tag.name,
             number);
    }
    return STORE_OK;
}

static int check_vocabulary(struct looking *looking)
{
    uint64_t tags = looking->sums->totals.tags;
    uint64_t names = 0;
    int code = kv_count(looking->view->txn, TABLE_TAG_NAMES, &names, looking->error);
    for (uint64_t number = 0; number < tags && code == STORE_OK; number++) {
        code = check_tag(looking, (uint32_t)number);
    }
    if (code == STORE_OK && names != tags) {
        TELL(looking, "there are %" PRIu64 " names of tags, and %" PRIu64 " tags", names, tags);
    }
    return code;
}

/* --- all of it ----------------------------------------------------------------------------------
 */

static void check_totals(struct looking *looking)
{
    const struct store_totals *totals = &looking->sums->totals;
    if (looking->totals.items != totals->items) {
        TELL(looking, "there are %" PRIu64 " items, and %" PRIu64 " on record",
             looking->totals.items, totals->items);
    }
    if (memcmp(&looking->totals.evidence, &totals->evidence, sizeof totals->evidence) != 0) {
        TELL(looking, "the counts of checks and second taggings are not those of the items");
    }
}

static int look(struct looking *looking)
{
    struct kv_txn *txn = looking->view->txn;
    const struct kv_bytes from_first = {0};
    int code = kv_walk(txn, TABLE_IDS, from_first, check_id, looking, looking->error);
    if (code == STORE_OK) {
        code =
            kv_walk(txn, TABLE_SUPERSEDED, from_first, check_superseded, looking, looking->error);
    }
    if (code == STORE_OK) {
        code = count_records(looking);
    }
    if (code == STORE_OK) {
        code = check_vocabulary(looking);
    }
    if (code == STORE_OK) {
        check_totals(looking);
    }
    return code;
}

int verify_store(struct store *store, const struct verify_sink *sink,
                 struct verify_store_sums *ret_sums, struct store_error *error)
{
    struct looking looking = {.sink = sink, .sums = ret_sums, .error = error};
    *ret_sums = (struct verify_store_sums){0};
    int code = verify_pages(store->kv, sink, &ret_sums->faults, error);
    if (code != STORE_OK || ret_sums->faults > 0) {
        return code;
    }
    code = store_read(store, &looking.view, error);
    if (code != STORE_OK) {
        return code;
    }
    ret_sums->totals = store_view_totals(looking.view);
    looking.counts = calloc(ret_sums->totals.tags + 1, sizeof *looking.counts);
    code =
        looking.counts ? look(&looking) : (int)store_fail(error, STORE_NO_MEMORY, "out of memory");
    free(looking.counts);
    item_buffer_deinit(&looking.buffer);
    store_end(looking.view);
    return code;
}
