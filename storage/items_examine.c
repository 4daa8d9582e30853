#include "storage/items_examine.h"

#include <stdlib.h>
#include <string.h>

#include "storage/items_private.h"
#include "storage/store_private.h"

/* --- beginning and ending -----------------------------------------------------------------------
 */

/* Reads the item that is spoken of, and begins a record that says the same of it. */
static int begin(struct store_view *view, const struct item_saying *saying, enum item_change change,
                 struct standing_item *standing, struct item_record *record,
                 struct store_error *error)
{
    int result = items_standing(view, saying->id, standing, error);
    if (result == STORE_OK && !item_stands(standing)) {
        return STORE_NOT_FOUND;
    }
    *record = standing->record;
    record->change = change;
    record->stored_at_ms = saying->at_ms;
    record->uid = saying->uid;
    return result;
}

static int put(struct store_view *view, const struct standing_item *standing,
               struct item_record *record, struct codec_writer *buffer,
               struct item_filed *ret_filed, struct store_error *error)
{
    int result = items_put(view, standing, record, items_stored_content(&standing->buffer.record),
                           buffer, error);
    if (result == STORE_OK) {
        *ret_filed = (struct item_filed){.seq = view->totals.seq,
                                         .was = ITEM_REVISED,
                                         .text_bytes = record->title.size + record->text.size,
                                         .tag_count = record->filed.count};
    }
    return result;
}

/* --- names into numbers -------------------------------------------------------------------------
 */

/* The numbers of names that must all be there; a retired tag only where the item has it. */
static int resolve(struct store_view *view, struct item_names names,
                   const struct item_record *present, struct item_refusal *refusal, uint32_t *into,
                   struct store_error *error)
{
    for (size_t i = 0; i < names.count; i++) {
        bool retired = false;
        int result = items_look_up(view, names.names[i], &into[i], &retired, error);
        if (result != STORE_OK) {
            return result;
        }
        refusal->retired = retired && !numbers_hold(present->tags, into[i]);
        if (into[i] == NO_NUMBER || refusal->retired) {
            refusal->at = i;
            return STORE_REFUSED;
        }
    }
    return STORE_OK;
}

/* --- rulings ------------------------------------------------------------------------------------
 */

static int compare_rulings(const void *left, const void *right)
{
    const struct item_ruling *a = left;
    const struct item_ruling *b = right;
    return (a->tag > b->tag) - (a->tag < b->tag);
}

/* Adds rulings on tags to `into`, each in the place of an earlier one on its tag. */
static size_t add_rulings(struct item_ruling *into, size_t count, struct numbers tags, bool belongs,
                          const struct item_saying *saying)
{
    for (size_t i = 0; i < tags.count; i++) {
        size_t at = 0;
        while (at < count && into[at].tag != tags.list[i]) {
            at++;
        }
        into[at] = (struct item_ruling){.tag = tags.list[i],
                                        .uid = saying->uid,
                                        .belongs = belongs,
                                        .at_ms = saying->at_ms,
                                        .editor = saying->who};
        count += at == count;
    }
    return count;
}

int items_rule(struct store_view *view, const struct item_saying *saying, struct item_names belongs,
               struct item_names denied, struct codec_writer *buffer, struct item_filed *ret_filed,
               struct item_refusal *ret_refusal, struct store_error *error)
{
    struct standing_item standing = {0};
    struct item_record record = {0};
    struct item_ruling *rulings = NULL;
    uint32_t *numbers = calloc(belongs.count + denied.count + 1, sizeof *numbers);
    int result = numbers ? STORE_OK : items_no_memory(error);
    if (result == STORE_OK) {
        result = begin(view, saying, ITEM_RULED, &standing, &record, error);
    }
    if (result == STORE_OK) {
        *ret_refusal = (struct item_refusal){.list = REFUSED_BELONGS};
        result = resolve(view, belongs, &record, ret_refusal, numbers, error);
    }
    if (result == STORE_OK) {
        *ret_refusal = (struct item_refusal){.list = REFUSED_NOT};
        result = resolve(view, denied, &record, ret_refusal, numbers + belongs.count, error);
    }
    if (result != STORE_OK) {
        goto done;
    }
    rulings = calloc(record.ruling_count + belongs.count + denied.count + 1, sizeof *rulings);
    if (!rulings) {
        result = items_no_memory(error);
        goto done;
    }
    if (record.ruling_count > 0) {
        memcpy(rulings, record.rulings, record.ruling_count * sizeof *rulings);
    }
    record.ruling_count =
        add_rulings(rulings, record.ruling_count,
                    (struct numbers){.list = numbers, .count = belongs.count}, true, saying);
    record.ruling_count = add_rulings(
        rulings, record.ruling_count,
        (struct numbers){.list = numbers + belongs.count, .count = denied.count}, false, saying);
    qsort(rulings, record.ruling_count, sizeof *rulings, compare_rulings);
    record.rulings = rulings;
    result = put(view, &standing, &record, buffer, ret_filed, error);
done:
    free(rulings);
    free(numbers);
    item_buffer_deinit(&standing.buffer);
    return result;
}

/* --- checks -------------------------------------------------------------------------------------
 */

/* The tags of a set, for those who want their names. The caller frees them. */
static int name_tags(struct store_view *view, struct numbers numbers,
                     struct vocabulary_tag **ret_tags, size_t *ret_count, struct store_error *error)
{
    struct vocabulary_tag *tags = calloc(numbers.count + 1, sizeof *tags);
    int result = tags ? STORE_OK : items_no_memory(error);
    for (size_t i = 0; i < numbers.count && result == STORE_OK; i++) {
        result = vocabulary_get(view, numbers.list[i], &tags[i], error);
    }
    if (result != STORE_OK) {
        free(tags);
        return result;
    }
    *ret_tags = tags;
    *ret_count = numbers.count;
    return STORE_OK;
}

/* Rulings that the check agrees with; its word is later than theirs. */
static size_t keep_agreeing(struct item_ruling *rulings, const struct item_record *record)
{
    size_t kept = 0;
    for (size_t i = 0; i < record->ruling_count; i++) {
        const struct item_ruling *ruling = &record->rulings[i];
        if (ruling->belongs == numbers_hold(record->check.tags, ruling->tag)) {
            rulings[kept++] = *ruling;
        }
    }
    return kept;
}

/*
 * Compares the complete list with what was there. Of the tags that nobody had examined before
 * (neither prompted nor ruled), each is a trial of whether the tagger gives what belongs. `room` is
 * for five lists of the longest.
 */
static struct numbers compare(const struct item_record *present, struct item_check *check,
                              size_t longest, uint32_t *room)
{
    struct numbers missed = numbers_without(check->tags, present->tags, room);
    check->seen = (uint32_t)present->tags.count;
    check->extra = numbers_without(present->tags, check->tags, room + longest);
    struct numbers unprompted = numbers_without(check->tags, present->prompted, room + 2 * longest);
    struct numbers unexamined = numbers_without(unprompted, present->belongs, room + 3 * longest);
    unexamined = numbers_without(unexamined, present->known_not, room + 2 * longest);
    check->given = numbers_common(unexamined, present->filed, room + 3 * longest);
    check->hidden = numbers_without(unexamined, present->filed, room + 4 * longest);
    return missed;
}

/* What an earlier check had gone through is no trial any more; its own trials stay. */
static void keep_trials(const struct item_check *earlier, struct item_check *check)
{
    if (earlier->is_there) {
        check->is_random = check->is_random || earlier->is_random;
        check->given = earlier->given;
        check->hidden = earlier->hidden;
    }
}

int items_check(struct store_view *view, const struct item_saying *saying, struct item_names tags,
                bool is_random, struct codec_writer *buffer, struct item_filed *ret_filed,
                struct item_checked *ret_checked, struct item_refusal *ret_refusal,
                struct store_error *error)
{
    struct standing_item standing = {0};
    struct item_record record = {0};
    struct item_checked checked = {0};
    struct item_ruling *rulings = NULL;
    uint32_t *room = NULL;
    uint32_t *numbers = calloc(tags.count + 1, sizeof *numbers);
    int result = numbers ? STORE_OK : items_no_memory(error);
    if (result == STORE_OK) {
        result = begin(view, saying, ITEM_CHECKED, &standing, &record, error);
    }
    if (result == STORE_OK) {
        *ret_refusal = (struct item_refusal){.list = REFUSED_TAG};
        result = resolve(view, tags, &record, ret_refusal, numbers, error);
    }
    if (result != STORE_OK) {
        goto done;
    }
    size_t longest = tags.count + standing.record.tags.count + 1;
    rulings = calloc(record.ruling_count + 1, sizeof *rulings);
    room = calloc(5 * longest, sizeof *room);
    if (!rulings || !room) {
        result = items_no_memory(error);
        goto done;
    }
    record.check = (struct item_check){.is_there = true,
                                       .is_random = is_random,
                                       .uid = saying->uid,
                                       .at_ms = saying->at_ms,
                                       .checker = saying->who,
                                       .vocabulary = (uint32_t)view->totals.tags,
                                       .tags = {numbers, numbers_sort_unique(numbers, tags.count)}};
    record.filed_after_check = false;
    struct numbers missed = compare(&standing.record, &record.check, longest, room);
    keep_trials(&standing.record.check, &record.check);
    record.ruling_count = keep_agreeing(rulings, &record);
    record.rulings = rulings;
    result = name_tags(view, missed, &checked.missed, &checked.missed_count, error);
    if (result == STORE_OK) {
        result = name_tags(view, record.check.extra, &checked.extra, &checked.extra_count, error);
    }
    if (result == STORE_OK) {
        result = put(view, &standing, &record, buffer, ret_filed, error);
    }
    if (result == STORE_OK) {
        *ret_checked = checked;
        checked = (struct item_checked){0};
    }
done:
    free(checked.missed);
    free(checked.extra);
    free(rulings);
    free(room);
    free(numbers);
    item_buffer_deinit(&standing.buffer);
    return result;
}

/* --- second taggings ----------------------------------------------------------------------------
 */

static bool is_text_same(struct store_text left, struct store_text right)
{
    return left.size == right.size &&
           (left.size == 0 || memcmp(left.data, right.data, left.size) == 0);
}

/* Where an earlier tagging of his stands; otherwise behind the last one. */
static size_t place_of(const struct item_record *record, struct store_text tagger)
{
    size_t at = 0;
    while (at < record->second_count && !is_text_same(record->seconds[at].tagger, tagger)) {
        at++;
    }
    return at;
}

static bool is_same_tagging(const struct item_record *record, size_t at, struct numbers tags)
{
    return at < record->second_count && record->seconds[at].tags.count == tags.count &&
           (tags.count == 0 ||
            memcmp(record->seconds[at].tags.list, tags.list, tags.count * sizeof *tags.list) == 0);
}

/* Looks the names up, and opens those that are not there once it is clear that none is refused. */
static int resolve_or_open(struct store_view *view, struct item_names names, bool open_unknown,
                           const struct item_record *present, uint32_t *into,
                           struct item_refusal *refusal, struct store_error *error)
{
    int result = STORE_OK;
    for (size_t i = 0; i < names.count && result == STORE_OK; i++) {
        bool retired = false;
        result = items_look_up(view, names.names[i], &into[i], &retired, error);
        bool is_unknown = into[i] == NO_NUMBER && !open_unknown;
        bool is_retired = retired && !numbers_hold(present->tags, into[i]);
        if (result == STORE_OK && (is_unknown || is_retired)) {
            *refusal = (struct item_refusal){.list = REFUSED_TAG, .at = i, .retired = retired};
            return STORE_REFUSED;
        }
    }
    for (size_t i = 0; i < names.count && result == STORE_OK; i++) {
        if (into[i] == NO_NUMBER) {
            result = vocabulary_open(view, names.names[i].data, names.names[i].size,
                                     view->totals.seq + 1, &into[i], error);
        }
    }
    return result;
}

int items_tag_again(struct store_view *view, const struct item_saying *saying,
                    struct item_names tags, struct store_text filed_at, bool open_unknown,
                    struct codec_writer *buffer, struct item_filed *ret_filed,
                    struct item_refusal *ret_refusal, struct store_error *error)
{
    struct standing_item standing = {0};
    struct item_record record = {0};
    struct item_second *seconds = NULL;
    uint32_t *numbers = calloc(tags.count + 1, sizeof *numbers);
    int result = numbers ? STORE_OK : items_no_memory(error);
    if (result == STORE_OK) {
        result = begin(view, saying, ITEM_TAGGED_AGAIN, &standing, &record, error);
    }
    if (result == STORE_OK && is_text_same(record.tagger, saying->who)) {
        *ret_refusal = (struct item_refusal){.list = REFUSED_TAGGER};
        result = STORE_REFUSED;
    }
    if (result == STORE_OK) {
        result = resolve_or_open(view, tags, open_unknown, &record, numbers, ret_refusal, error);
    }
    if (result != STORE_OK) {
        goto done;
    }
    struct numbers set = {.list = numbers, .count = numbers_sort_unique(numbers, tags.count)};
    size_t at = place_of(&record, saying->who);
    if (is_same_tagging(&record, at, set)) {
        *ret_filed = (struct item_filed){.seq = standing.entry.seq, .was = ITEM_SAME};
        goto done;
    }
    seconds = calloc(record.second_count + 1, sizeof *seconds);
    if (!seconds) {
        result = items_no_memory(error);
        goto done;
    }
    if (record.second_count > 0) {
        memcpy(seconds, record.seconds, record.second_count * sizeof *seconds);
    }
    seconds[at] = (struct item_second){.tagger = saying->who,
                                       .filed_at = filed_at,
                                       .uid = saying->uid,
                                       .at_ms = saying->at_ms,
                                       .tags = set};
    bool is_new = at == record.second_count;
    record.second_count += is_new;
    record.seconds = seconds;
    result = put(view, &standing, &record, buffer, ret_filed, error);
    if (result == STORE_OK) {
        ret_filed->was = is_new ? ITEM_NEW : ITEM_REVISED;
    }
done:
    free(seconds);
    free(numbers);
    item_buffer_deinit(&standing.buffer);
    return result;
}
