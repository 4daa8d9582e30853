#include "storage/items.h"

#include <stdlib.h>
#include <string.h>

#include "storage/items_private.h"
#include "storage/store_private.h"
#include "storage/vocabulary.h"

static int no_memory(struct store_error *error)
{
    (void)store_fail(error, STORE_NO_MEMORY, "out of memory");
    return STORE_NO_MEMORY;
}

static int put_id(struct store_view *view, struct store_text id, struct id_entry entry,
                  struct store_error *error)
{
    unsigned char value[9];
    struct codec_writer writer = {.data = value, .capacity = sizeof value};
    codec_put_u64(&writer, entry.seq);
    codec_put_u8(&writer, entry.withdrawn ? 1 : 0);
    return kv_put(view->txn, TABLE_IDS, kv_bytes_of(id.data, id.size),
                  kv_bytes_of(value, sizeof value), error);
}

/* --- resolving tags ----------------------------------------------------------------------------
 */

/* The numbers of a filing's three lists, behind each other; an unknown tag has no number yet. */
struct resolved {
    uint32_t *numbers;
    size_t tag_count;
    size_t prompted_count;
    size_t declined_count;
    size_t unknown; /* tags to be opened */
};

#define NO_NUMBER UINT32_MAX

static int compare_numbers(const void *left, const void *right)
{
    uint32_t a = *(const uint32_t *)left;
    uint32_t b = *(const uint32_t *)right;
    return a < b ? -1 : a > b;
}

/* Sorts a list and drops what stands twice (two names of one tag); returns its new length. */
static size_t sort_unique(uint32_t *numbers, size_t count)
{
    if (count == 0) {
        return 0;
    }
    qsort(numbers, count, sizeof *numbers, compare_numbers);
    size_t kept = 1;
    for (size_t i = 1; i < count; i++) {
        if (numbers[i] != numbers[kept - 1]) {
            numbers[kept++] = numbers[i];
        }
    }
    return kept;
}

static int look_up(struct store_view *view, struct store_text name, uint32_t *ret_number,
                   bool *ret_retired, struct store_error *error)
{
    struct vocabulary_tag tag;
    int result = vocabulary_find(view, name.data, name.size, &tag, error);
    if (result == STORE_NOT_FOUND) {
        *ret_number = NO_NUMBER;
        *ret_retired = false;
        return STORE_OK;
    }
    if (result == STORE_OK) {
        *ret_number = tag.number;
        *ret_retired = tag.state == VOCABULARY_RETIRED;
    }
    return result;
}

/* Whether the item as it stands has a tag. */
static bool has_number(const struct item_record *present, uint32_t number)
{
    return present && present->tag_count > 0 &&
           bsearch(&number, present->tags, present->tag_count, sizeof number, compare_numbers);
}

/* Looks every name up; finds the first that the vocabulary refuses before anything is changed. */
static int resolve(struct store_view *view, const struct item_filing *filing,
                   const struct item_record *present, struct resolved *resolved,
                   struct item_refusal *ret_refusal, struct store_error *error)
{
    uint32_t *next = resolved->numbers;
    for (size_t i = 0; i < filing->tag_count; i++, next++) {
        bool retired = false;
        int result = look_up(view, filing->tags[i], next, &retired, error);
        if (result != STORE_OK) {
            return result;
        }
        bool unknown = *next == NO_NUMBER;
        if ((unknown && !filing->open_unknown) || (retired && !has_number(present, *next))) {
            *ret_refusal = (struct item_refusal){.list = REFUSED_TAG, .at = i, .retired = retired};
            return STORE_REFUSED;
        }
        resolved->unknown += unknown ? 1 : 0;
    }
    for (size_t i = 0; i < filing->declined_count; i++, next++) {
        bool retired = false;
        int result = look_up(view, filing->declined[i], next, &retired, error);
        if (result != STORE_OK) {
            return result;
        }
        if (*next == NO_NUMBER) {
            *ret_refusal = (struct item_refusal){.list = REFUSED_DECLINED, .at = i};
            return STORE_REFUSED;
        }
    }
    return STORE_OK;
}

static int open_unknown(struct store_view *view, const struct item_filing *filing, uint64_t seq,
                        struct resolved *resolved, struct store_error *error)
{
    for (size_t i = 0; i < filing->tag_count && resolved->unknown > 0; i++) {
        if (resolved->numbers[i] != NO_NUMBER) {
            continue;
        }
        int result = vocabulary_open(view, filing->tags[i].data, filing->tags[i].size, seq,
                                     &resolved->numbers[i], error);
        if (result != STORE_OK) {
            return result;
        }
        resolved->unknown--;
    }
    return STORE_OK;
}

/* Adds the numbers of `prompted` behind the others, and sorts all three lists. */
static int arrange(struct store_view *view, const struct item_filing *filing,
                   struct resolved *resolved, struct store_error *error)
{
    uint32_t *declined = resolved->numbers + filing->tag_count;
    uint32_t *prompted = declined + filing->declined_count;
    for (size_t i = 0; i < filing->prompted_count; i++) {
        bool retired = false;
        int result = look_up(view, filing->prompted[i], &prompted[i], &retired, error);
        if (result != STORE_OK) {
            return result;
        }
    }
    resolved->tag_count = sort_unique(resolved->numbers, filing->tag_count);
    resolved->declined_count = sort_unique(declined, filing->declined_count);
    resolved->prompted_count = sort_unique(prompted, filing->prompted_count);
    return STORE_OK;
}

/* --- filing ------------------------------------------------------------------------------------
 */

static void put_text(struct codec_writer *writer, struct store_text text)
{
    codec_put_blob(writer, text.data, text.size);
}

static void put_numbers(struct codec_writer *writer, const uint32_t *numbers, size_t count)
{
    codec_put_u32(writer, (uint32_t)count);
    for (size_t i = 0; i < count; i++) {
        codec_put_u32(writer, numbers[i]);
    }
}

static void encode_content(const struct item_filing *filing, const struct resolved *resolved,
                           struct codec_writer *content)
{
    const uint32_t *declined = resolved->numbers + filing->tag_count;
    codec_reset(content);
    put_text(content, filing->title);
    put_text(content, filing->text);
    put_text(content, filing->fields);
    put_text(content, filing->language);
    put_numbers(content, resolved->numbers, resolved->tag_count);
    put_numbers(content, declined + filing->declined_count, resolved->prompted_count);
    put_numbers(content, declined, resolved->declined_count);
}

static void encode_head(struct codec_writer *record, enum record_kind kind, uint64_t replaced,
                        int64_t stored_at_ms, uint32_t uid, struct store_text id)
{
    codec_reset(record);
    codec_put_u8(record, (uint8_t)kind);
    codec_put_u64(record, replaced);
    codec_put_u64(record, (uint64_t)stored_at_ms);
    codec_put_u32(record, uid);
    put_text(record, id);
}

/* Moves the counts of one tag that an item gains (+1) or loses (-1). */
static int move_tag(struct store_view *view, uint32_t number, int by, bool prompted,
                    struct store_error *error)
{
    struct vocabulary_tag tag;
    int result = vocabulary_get(view, number, &tag, error);
    if (result != STORE_OK) {
        return result == STORE_NOT_FOUND
                   ? (int)store_fail(error, STORE_CORRUPT, "an item holds unknown tag %u", number)
                   : result;
    }
    tag.count = (uint32_t)((int64_t)tag.count + by);
    tag.unprompted = (uint32_t)((int64_t)tag.unprompted + (prompted ? 0 : by));
    return vocabulary_put(view, &tag, error);
}

static int move_tags(struct store_view *view, const uint32_t *tags, size_t tag_count,
                     const uint32_t *prompted, size_t prompted_count, int by,
                     struct store_error *error)
{
    for (size_t i = 0; i < tag_count; i++) {
        bool is_prompted = prompted_count > 0 && bsearch(&tags[i], prompted, prompted_count,
                                                         sizeof *prompted, compare_numbers);
        int result = move_tag(view, tags[i], by, is_prompted, error);
        if (result != STORE_OK) {
            return result;
        }
    }
    return STORE_OK;
}

/* Puts a change under the next seq: its record, the id's entry, and what it took the place of. */
static int put_change(struct store_view *view, struct store_text id, uint64_t replaced,
                      bool withdrawn, const struct codec_writer *record, struct store_error *error)
{
    if (record->failed) {
        return no_memory(error);
    }
    uint64_t seq = view->totals.seq + 1;
    int result = records_put(view, seq, record, error);
    if (result == STORE_OK) {
        result = put_id(view, id, (struct id_entry){.seq = seq, .withdrawn = withdrawn}, error);
    }
    if (result == STORE_OK && replaced != 0) {
        unsigned char key[8];
        unsigned char value[8];
        codec_key_u64(key, seq);
        codec_key_u64(value, replaced);
        result = kv_append(view->txn, TABLE_SUPERSEDED, kv_bytes_of(key, sizeof key),
                           kv_bytes_of(value, sizeof value), error);
    }
    if (result == STORE_OK) {
        view->totals.seq = seq;
    }
    return result;
}

/* What stands under the id of a filing. */
struct standing_item {
    struct id_entry entry; /* seq 0: the id is new */
    struct item_buffer buffer;
    struct item_record record; /* where it is not withdrawn */
};

static bool stands(const struct standing_item *standing)
{
    return standing->entry.seq != 0 && !standing->entry.withdrawn;
}

static int find_standing(struct store_view *view, struct store_text id,
                         struct standing_item *standing, struct store_error *error)
{
    int result = items_entry(view, id, &standing->entry, error);
    if (result == STORE_NOT_FOUND) {
        return STORE_OK;
    }
    if (result == STORE_OK && !standing->entry.withdrawn) {
        result = items_read(view, standing->entry.seq, &standing->buffer, &standing->record, error);
    }
    return result;
}

static int write_filing(struct store_view *view, const struct item_filing *filing,
                        struct resolved *resolved, const struct standing_item *standing,
                        struct codec_writer *content, struct codec_writer *record,
                        struct store_error *error)
{
    encode_head(record, RECORD_FILING, standing->entry.seq, filing->stored_at_ms, filing->uid,
                filing->id);
    put_text(record, filing->tagger);
    put_text(record, filing->filed_at);
    codec_put_blob(record, content->data, content->size);
    int result = put_change(view, filing->id, standing->entry.seq, false, record, error);
    if (result == STORE_OK && stands(standing)) {
        const struct item_record *old = &standing->record;
        result = move_tags(view, old->tags, old->tag_count, old->prompted, old->prompted_count, -1,
                           error);
    }
    if (result == STORE_OK) {
        const uint32_t *prompted = resolved->numbers + filing->tag_count + filing->declined_count;
        result = move_tags(view, resolved->numbers, resolved->tag_count, prompted,
                           resolved->prompted_count, 1, error);
    }
    if (result == STORE_OK && !stands(standing)) {
        view->totals.items++;
    }
    return result;
}

int items_file(struct store_view *view, const struct item_filing *filing,
               struct codec_writer *buffer, struct item_filed *ret_filed,
               struct item_refusal *ret_refusal, struct store_error *error)
{
    struct standing_item standing = {0};
    struct codec_writer content = {0};
    struct resolved resolved = {0};
    size_t numbers = filing->tag_count + filing->declined_count + filing->prompted_count;
    resolved.numbers = calloc(numbers ? numbers : 1, sizeof *resolved.numbers);
    int result = resolved.numbers ? STORE_OK : no_memory(error);
    if (result == STORE_OK) {
        result = find_standing(view, filing->id, &standing, error);
    }
    if (result == STORE_OK) {
        result = resolve(view, filing, stands(&standing) ? &standing.record : NULL, &resolved,
                         ret_refusal, error);
    }
    bool tags_known = resolved.unknown == 0;
    if (result == STORE_OK) {
        result = open_unknown(view, filing, view->totals.seq + 1, &resolved, error);
    }
    if (result == STORE_OK) {
        result = arrange(view, filing, &resolved, error);
    }
    if (result != STORE_OK) {
        goto done;
    }
    encode_content(filing, &resolved, &content);
    if (content.failed) {
        result = no_memory(error);
        goto done;
    }
    if (stands(&standing) && tags_known) {
        struct store_text old = items_stored_content(&standing.buffer.record);
        if (old.size == content.size && memcmp(old.data, content.data, old.size) == 0) {
            *ret_filed = (struct item_filed){.seq = standing.entry.seq, .was = ITEM_SAME};
            goto done;
        }
    }
    result = write_filing(view, filing, &resolved, &standing, &content, buffer, error);
    if (result == STORE_OK) {
        *ret_filed = (struct item_filed){.seq = view->totals.seq,
                                         .was = stands(&standing) ? ITEM_REVISED : ITEM_NEW};
    }
done:
    free(resolved.numbers);
    codec_deinit(&content);
    item_buffer_deinit(&standing.buffer);
    return result;
}

int items_withdraw(struct store_view *view, struct store_text id, int64_t stored_at_ms,
                   uint32_t uid, struct codec_writer *buffer, uint64_t *ret_seq,
                   struct store_error *error)
{
    struct standing_item standing = {0};
    int result = find_standing(view, id, &standing, error);
    if (result == STORE_OK && !stands(&standing)) {
        result = STORE_NOT_FOUND;
    }
    if (result == STORE_OK) {
        encode_head(buffer, RECORD_WITHDRAWAL, standing.entry.seq, stored_at_ms, uid, id);
        result = put_change(view, id, standing.entry.seq, true, buffer, error);
    }
    if (result == STORE_OK) {
        const struct item_record *old = &standing.record;
        result = move_tags(view, old->tags, old->tag_count, old->prompted, old->prompted_count, -1,
                           error);
    }
    if (result == STORE_OK) {
        view->totals.items--;
        *ret_seq = view->totals.seq;
    }
    item_buffer_deinit(&standing.buffer);
    return result;
}
