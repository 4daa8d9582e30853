/*
 * What an item adds to the counts of its tags and of the store. A change takes out what the item
 * was and brings in what it is; a tag for which both are the same is not touched.
 */
#include <stdlib.h>
#include <string.h>

#include "storage/items_private.h"
#include "storage/store_private.h"
#include "storage/vocabulary.h"

/* --- one tag of one item ------------------------------------------------------------------------
 */

/* In how many second taggings of the item a tag stands. */
static uint32_t seconds_with(const struct item_record *item, uint32_t tag)
{
    uint32_t count = 0;
    for (size_t i = 0; i < item->second_count; i++) {
        count += numbers_hold(item->seconds[i].tags, tag);
    }
    return count;
}

static bool was_given_unprompted(const struct item_record *item, uint32_t tag)
{
    return numbers_hold(item->filed, tag) && !numbers_hold(item->prompted, tag);
}

/* Adds what an item counts for a tag, `sign` times. */
static void add_item(struct vocabulary_counts *counts, const struct item_record *item, uint32_t tag,
                     uint32_t sign)
{
    if (!item) {
        return;
    }
    const struct item_check *check = &item->check;
    bool is_unprompted = numbers_hold(item->unprompted, tag);
    bool is_ruled_in = numbers_hold(item->belongs, tag);
    bool was_found = is_ruled_in && !numbers_hold(item->filed, tag) && !check->is_there;
    uint32_t seconds = seconds_with(item, tag);
    counts->count += sign * numbers_hold(item->tags, tag);
    counts->unprompted += sign * is_unprompted;
    counts->unchecked += sign * (is_unprompted && !check->is_there);
    counts->found += sign * was_found;
    counts->ruled_belongs += sign * is_ruled_in;
    counts->ruled_not += sign * numbers_hold(item->denied, tag);
    if (check->is_random) {
        bool was_given = numbers_hold(check->given, tag);
        counts->check_given += sign * was_given;
        counts->check_true += sign * (was_given || numbers_hold(check->hidden, tag));
    }
    counts->second_true += sign * seconds;
    counts->second_given += sign * (was_given_unprompted(item, tag) ? seconds : 0);
}

static int move_tag(struct store_view *view, const struct item_record *from,
                    const struct item_record *to, uint32_t number, struct store_error *error)
{
    struct vocabulary_counts change = {0};
    static const struct vocabulary_counts NONE;
    add_item(&change, from, number, (uint32_t)-1); /* wraps around, and back when it is added */
    add_item(&change, to, number, 1);
    if (memcmp(&change, &NONE, sizeof change) == 0) {
        return STORE_OK;
    }
    struct vocabulary_tag tag;
    int result = vocabulary_get(view, number, &tag, error);
    if (result != STORE_OK) {
        return result == STORE_NOT_FOUND
                   ? (int)store_fail(error, STORE_CORRUPT, "an item holds unknown tag %u", number)
                   : result;
    }
    vocabulary_add(&tag.counts, &change);
    return vocabulary_put(view, &tag, error);
}

/* --- all tags that an item has to do with -------------------------------------------------------
 */

static size_t add_list(uint32_t *into, size_t at, struct numbers numbers)
{
    if (numbers.count > 0) {
        memcpy(into + at, numbers.list, numbers.count * sizeof *into);
    }
    return at + numbers.count;
}

static size_t count_mentions(const struct item_record *item)
{
    if (!item) {
        return 0;
    }
    size_t count = item->filed.count + item->ruling_count + item->check.tags.count +
                   item->check.given.count + item->check.hidden.count;
    for (size_t i = 0; i < item->second_count; i++) {
        count += item->seconds[i].tags.count;
    }
    return count;
}

static size_t add_mentions(uint32_t *into, size_t at, const struct item_record *item)
{
    if (!item) {
        return at;
    }
    at = add_list(into, at, item->filed);
    at = add_list(into, at, item->belongs);
    at = add_list(into, at, item->denied);
    at = add_list(into, at, item->check.tags);
    at = add_list(into, at,
                  item->check.given); /* of an earlier check, they may not be in its tags */
    at = add_list(into, at, item->check.hidden);
    for (size_t i = 0; i < item->second_count; i++) {
        at = add_list(into, at, item->seconds[i].tags);
    }
    return at;
}

/* --- the store's totals -------------------------------------------------------------------------
 */

static void add_totals(struct store_evidence *evidence, const struct item_record *item,
                       uint64_t sign)
{
    if (!item) {
        return;
    }
    const struct item_check *check = &item->check;
    evidence->checks_random += sign * (check->is_there && check->is_random);
    evidence->checks_picked += sign * (check->is_there && !check->is_random);
    evidence->seen += check->is_random ? sign * check->seen : 0;
    evidence->wrong += check->is_random ? sign * check->extra.count : 0;
    if (item->second_count == 0) {
        return;
    }
    evidence->second_items += sign;
    for (size_t i = 0; i < item->second_count; i++) {
        struct numbers second = item->seconds[i].tags;
        evidence->second_first += sign * (item->filed.count - item->prompted.count);
        evidence->second_second += sign * second.count;
        for (size_t j = 0; j < second.count; j++) {
            evidence->second_both += sign * was_given_unprompted(item, second.list[j]);
        }
    }
}

int item_tally_move(struct store_view *view, const struct item_record *from,
                    const struct item_record *to, struct store_error *error)
{
    size_t room = count_mentions(from) + count_mentions(to);
    uint32_t *mentioned = calloc(room ? room : 1, sizeof *mentioned);
    if (!mentioned) {
        return items_no_memory(error);
    }
    size_t count = numbers_sort_unique(
        mentioned, add_mentions(mentioned, add_mentions(mentioned, 0, from), to));
    int result = STORE_OK;
    for (size_t i = 0; i < count && result == STORE_OK; i++) {
        result = move_tag(view, from, to, mentioned[i], error);
    }
    free(mentioned);
    add_totals(&view->totals.evidence, from, UINT64_MAX);
    add_totals(&view->totals.evidence, to, 1);
    view->totals.items += to ? 1 : 0;
    view->totals.items -= from ? 1 : 0;
    return result;
}

int item_tally_add(struct vocabulary_counts *counts, uint64_t tag_count,
                   const struct item_record *item)
{
    size_t room = count_mentions(item);
    uint32_t *mentioned = calloc(room ? room : 1, sizeof *mentioned);
    if (!mentioned) {
        return STORE_NO_MEMORY;
    }
    size_t count = numbers_sort_unique(mentioned, add_mentions(mentioned, 0, item));
    int result = STORE_OK;
    for (size_t i = 0; i < count; i++) {
        if (mentioned[i] < tag_count) {
            add_item(&counts[mentioned[i]], item, mentioned[i], 1);
        } else {
            result = STORE_CORRUPT;
        }
    }
    free(mentioned);
    return result;
}

void item_tally_totals(struct store_totals *totals, const struct item_record *item)
{
    add_totals(&totals->evidence, item, 1);
    totals->items++;
}
