#include "storage/items.h"

#include <stdlib.h>
#include <string.h>

#include "storage/items_private.h"
#include "storage/store_private.h"
#include "storage/vocabulary.h"

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

int items_look_up(struct store_view *view, struct store_text name, uint32_t *ret_number,
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

/* On the item as it is, or as it was filed: what is filed again is the same. */
static bool is_on_item(const struct item_record *present, uint32_t number)
{
    return present && (numbers_hold(present->tags, number) || numbers_hold(present->filed, number));
}

/* Looks every name up; finds the first that the vocabulary refuses before anything is changed. */
static int resolve(struct store_view *view, const struct item_filing *filing,
                   const struct item_record *present, struct resolved *resolved,
                   struct item_refusal *ret_refusal, struct store_error *error)
{
    uint32_t *next = resolved->numbers;
    for (size_t i = 0; i < filing->tag_count; i++, next++) {
        bool retired = false;
        int result = items_look_up(view, filing->tags[i], next, &retired, error);
        if (result != STORE_OK) {
            return result;
        }
        bool unknown = *next == NO_NUMBER;
        if ((unknown && !filing->open_unknown) || (retired && !is_on_item(present, *next))) {
            *ret_refusal = (struct item_refusal){.list = REFUSED_TAG, .at = i, .retired = retired};
            return STORE_REFUSED;
        }
        resolved->unknown += unknown ? 1 : 0;
    }
    for (size_t i = 0; i < filing->declined_count; i++, next++) {
        bool retired = false;
        int result = items_look_up(view, filing->declined[i], next, &retired, error);
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
        int result = items_look_up(view, filing->prompted[i], &prompted[i], &retired, error);
        if (result != STORE_OK) {
            return result;
        }
    }
    resolved->tag_count = numbers_sort_unique(resolved->numbers, filing->tag_count);
    resolved->declined_count = numbers_sort_unique(declined, filing->declined_count);
    resolved->prompted_count = numbers_sort_unique(prompted, filing->prompted_count);
    return STORE_OK;
}

/* --- filing ------------------------------------------------------------------------------------
 */

static struct numbers tags_of(const struct resolved *resolved)
{
    return (struct numbers){.list = resolved->numbers, .count = resolved->tag_count};
}

static struct numbers declined_of(const struct item_filing *filing, const struct resolved *resolved)
{
    return (struct numbers){.list = resolved->numbers + filing->tag_count,
                            .count = resolved->declined_count};
}

static struct numbers prompted_of(const struct item_filing *filing, const struct resolved *resolved)
{
    return (struct numbers){.list = resolved->numbers + filing->tag_count + filing->declined_count,
                            .count = resolved->prompted_count};
}

static void encode_content(const struct item_filing *filing, const struct resolved *resolved,
                           struct codec_writer *content)
{
    codec_reset(content);
    item_put_text(content, filing->title);
    item_put_text(content, filing->text);
    item_put_text(content, filing->fields);
    item_put_text(content, filing->language);
    item_put_numbers(content, tags_of(resolved));
    item_put_numbers(content, prompted_of(filing, resolved));
    item_put_numbers(content, declined_of(filing, resolved));
}

/* What a filing leaves of the rulings before it: the latest word on a tag counts. Returns how many
 * `into` (with room for all) holds. */
static size_t keep_rulings(const struct item_record *present, const struct item_record *filed,
                           struct item_ruling *into)
{
    size_t kept = 0;
    for (size_t i = 0; i < present->ruling_count; i++) {
        const struct item_ruling *ruling = &present->rulings[i];
        struct numbers against = ruling->belongs ? filed->declined : filed->filed;
        if (!numbers_hold(against, ruling->tag)) {
            into[kept++] = *ruling;
        }
    }
    return kept;
}

/* Nobody is a second tagger beside himself. Likewise. */
static size_t keep_seconds(const struct item_record *present, struct store_text tagger,
                           struct item_second *into)
{
    size_t kept = 0;
    for (size_t i = 0; i < present->second_count; i++) {
        struct store_text other = present->seconds[i].tagger;
        if (other.size != tagger.size || memcmp(other.data, tagger.data, tagger.size) != 0) {
            into[kept++] = present->seconds[i];
        }
    }
    return kept;
}

/* Files over what stands; what people have said of the item stays. */
static int write_filing(struct store_view *view, const struct item_filing *filing,
                        const struct resolved *resolved, const struct standing_item *standing,
                        const struct codec_writer *content, struct codec_writer *buffer,
                        struct store_error *error)
{
    const struct item_record *present = &standing->record; /* empty where nothing stands */
    struct item_record record = {.change = ITEM_FILED,
                                 .stored_at_ms = filing->stored_at_ms,
                                 .uid = filing->uid,
                                 .id = filing->id,
                                 .tagger = filing->tagger,
                                 .filed_at = filing->filed_at,
                                 .filed = tags_of(resolved),
                                 .prompted = prompted_of(filing, resolved),
                                 .declined = declined_of(filing, resolved),
                                 .filed_after_check = present->check.is_there,
                                 .check = present->check};
    struct item_ruling *rulings = calloc(present->ruling_count + 1, sizeof *rulings);
    struct item_second *seconds = calloc(present->second_count + 1, sizeof *seconds);
    int result = rulings && seconds ? STORE_OK : items_no_memory(error);
    if (result == STORE_OK) {
        record.rulings = rulings;
        record.ruling_count = keep_rulings(present, &record, rulings);
        record.seconds = seconds;
        record.second_count = keep_seconds(present, filing->tagger, seconds);
        result = items_put(
            view, standing, &record,
            (struct store_text){.data = (const char *)content->data, .size = content->size}, buffer,
            error);
    }
    free(rulings);
    free(seconds);
    return result;
}

/* Whether the filing is the one that stands there. */
static bool is_same(const struct standing_item *standing, const struct codec_writer *content)
{
    struct store_text old = items_stored_content(&standing->buffer.record);
    return old.size == content->size && memcmp(old.data, content->data, old.size) == 0;
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
    int result = resolved.numbers ? STORE_OK : items_no_memory(error);
    if (result == STORE_OK) {
        result = items_standing(view, filing->id, &standing, error);
    }
    if (result == STORE_OK) {
        result = resolve(view, filing, item_stands(&standing) ? &standing.record : NULL, &resolved,
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
        result = items_no_memory(error);
        goto done;
    }
    if (item_stands(&standing) && tags_known && is_same(&standing, &content)) {
        *ret_filed = (struct item_filed){.seq = standing.record.filed_seq, .was = ITEM_SAME};
        goto done;
    }
    result = write_filing(view, filing, &resolved, &standing, &content, buffer, error);
    if (result == STORE_OK) {
        *ret_filed = (struct item_filed){.seq = view->totals.seq,
                                         .was = item_stands(&standing) ? ITEM_REVISED : ITEM_NEW,
                                         .text_bytes = filing->title.size + filing->text.size,
                                         .tag_count = resolved.tag_count};
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
    int result = items_standing(view, id, &standing, error);
    if (result == STORE_OK && !item_stands(&standing)) {
        result = STORE_NOT_FOUND;
    }
    if (result == STORE_OK) {
        struct item_record record = {
            .change = ITEM_WITHDRAWN, .stored_at_ms = stored_at_ms, .uid = uid, .id = id};
        result = items_put(view, &standing, &record, (struct store_text){0}, buffer, error);
    }
    if (result == STORE_OK) {
        *ret_seq = view->totals.seq;
    }
    item_buffer_deinit(&standing.buffer);
    return result;
}
