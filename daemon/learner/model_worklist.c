/*
 * Entries of the worklist: what an item may lack, by scores from which the item's own share is
 * taken out.
 */
#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/grow.h"
#include "daemon/learner/model.h"
#include "daemon/learner/model_private.h"

/* A gap that is less likely than this is not worth its place. */
static const double LEAST_CHANCE = 0.005;

/* Scores are stale once the model has grown by one part in so many. */
enum {
    STALE_SHARE = 8
};

/* --- entries of the worklist --------------------------------------------------------------------
 */

/* What was stored is read only now, and its tags are about to be places in arrays. */
static bool knows_tags(const struct model *model, const struct worklist_entry *entry)
{
    for (uint32_t i = 0; i < entry->gap_count; i++) {
        if (entry->gaps[i].tag >= model->tag_count) {
            return false;
        }
    }
    for (uint32_t i = 0; i < entry->pair_count; i++) {
        if (entry->pairs[i].tag >= model->tag_count) {
            return false;
        }
    }
    return true;
}

/* Gives an entry that was read with `result`, if it can be one of this model. */
static int give_entry(const struct model *model, int result, const struct worklist_entry *entry,
                      struct worklist_entry *ret_entry)
{
    if (result == 0 && !knows_tags(model, entry)) {
        return -EIO;
    }
    if (result == 0) {
        *ret_entry = *entry;
    }
    return result;
}

int model_find_entry(const struct model *model, const struct base *base, uint64_t number,
                     struct worklist_entry *ret_entry)
{
    struct worklist_entry entry;
    int result = worklist_find(model->worklist, base, number, &entry);
    return give_entry(model, result, &entry, ret_entry);
}

int model_entry_after(const struct model *model, const struct base *base, uint64_t number,
                      struct worklist_entry *ret_entry)
{
    struct worklist_entry entry;
    int result = worklist_after(model->worklist, base, number, &entry);
    return give_entry(model, result, &entry, ret_entry);
}

/* --- own shares ---------------------------------------------------------------------------------
 */

int model_take_own(const struct model *model, const struct worklist_entry *entry,
                   struct model_scratch *scratch)
{
    if (GROW(&scratch->own, &scratch->own_capacity, model->tag_count) < 0) {
        return -ENOMEM;
    }
    scratch->lifted_count = 0;
    for (uint32_t i = 0; entry && i < entry->pair_count; i++) {
        uint32_t tag = entry->pairs[i].tag;
        float score = model_score(model, scratch, tag);
        float honest = score - entry->pairs[i].own;
        scratch->own[tag] = entry->pairs[i].own;
        if (score <= WEIGHTS_FLOOR_SCORE && honest > WEIGHTS_FLOOR_SCORE) {
            scratch->lifted[scratch->lifted_count++] = (struct weights_rival){tag, score};
        }
    }
    return 0;
}

void model_clear_own(const struct worklist_entry *entry, struct model_scratch *scratch)
{
    for (uint32_t i = 0; entry && i < entry->pair_count; i++) {
        scratch->own[entry->pairs[i].tag] = 0.0F;
    }
    scratch->lifted_count = 0;
}

/* --- making an entry ----------------------------------------------------------------------------
 */

/* Puts a gap among the entry's best, by falling chance. */
static void insert_gap(struct worklist_entry *entry, double chances[WORKLIST_GAPS],
                       const struct worklist_gap *gap, double chance)
{
    size_t at = entry->gap_count;
    if (at == WORKLIST_GAPS) {
        if (chances[at - 1] >= chance) {
            return;
        }
        at--;
    } else {
        entry->gap_count++;
    }
    while (at > 0 && chances[at - 1] < chance) {
        entry->gaps[at] = entry->gaps[at - 1];
        chances[at] = chances[at - 1];
        at--;
    }
    entry->gaps[at] = *gap;
    chances[at] = chance;
}

void model_make_entry(const struct model *model, const struct model_item *item,
                      const struct model_scratch *scratch, struct worklist_entry *ret_entry)
{
    double chances[WORKLIST_GAPS] = {0};
    double promise = model_promise(model, item->checked_below, scratch);
    *ret_entry = (struct worklist_entry){.number = item->number,
                                         .scored = model->latest,
                                         .counted = model->evidence_items,
                                         .promise = (float)promise};
    for (enum standing_band band = STANDING_HEAD; band < STANDING_BANDS; band++) {
        const struct candidates *best = &scratch->best[band];
        for (size_t i = 0; i < best->count; i++) {
            uint32_t tag = best->tags[i];
            if (scratch->barred[tag] != MARK_NONE || tag < item->checked_below) {
                continue;
            }
            double chance = model_missing_chance(model, tag, (double)best->scores[i], promise);
            if (chance >= LEAST_CHANCE) {
                const struct worklist_gap gap = {.tag = tag, .score = best->scores[i]};
                insert_gap(ret_entry, chances, &gap, chance);
            }
        }
    }
}

void model_note_pairs(struct worklist_entry *entry, const struct model_scratch *scratch)
{
    entry->pair_count = entry->gap_count;
    for (uint32_t i = 0; i < entry->gap_count; i++) {
        entry->pairs[i] = (struct worklist_pair){.tag = entry->gaps[i].tag,
                                                 .counted = entry->gaps[i].score,
                                                 .own = scratch->own[entry->gaps[i].tag]};
    }
}

void model_keep_counted(const struct worklist_entry *old, struct worklist_entry *entry)
{
    entry->counted = old->counted;
    for (uint32_t i = 0; i < entry->pair_count; i++) {
        for (uint32_t j = 0; j < old->pair_count; j++) {
            if (old->pairs[j].tag == entry->pairs[i].tag) {
                entry->pairs[i].counted = old->pairs[j].counted;
            }
        }
    }
}

/* --- scoring again ------------------------------------------------------------------------------
 */

/* What was learned stays as it was. */
static void keep_pairs(const struct worklist_entry *from, struct worklist_entry *to)
{
    to->counted = from->counted;
    to->pair_count = from->pair_count;
    memcpy(to->pairs, from->pairs, sizeof to->pairs);
}

int model_rescore(const struct model *model, const struct model_item *item,
                  struct model_scratch *scratch, struct worklist_entry *ret_entry)
{
    struct worklist_entry listed;
    int result = model_find_entry(model, scratch->base, item->number, &listed);
    if (result < 0 && result != -ENOENT) {
        return result;
    }
    const struct worklist_entry *entry = result == 0 ? &listed : NULL;
    result = model_score_words(model, item->features, item->feature_count, true, scratch);
    if (result == 0) {
        result = model_mark_item(model, item, scratch);
    }
    if (result == 0) {
        result = model_take_own(model, entry, scratch);
    }
    if (result < 0) {
        return result;
    }
    model_find_best(model, scratch);
    model_make_entry(model, item, scratch, ret_entry);
    if (entry) {
        keep_pairs(entry, ret_entry);
    }
    model_unmark_item(item, scratch);
    model_clear_own(entry, scratch);
    return 0;
}

int model_relist(struct model *model, const struct base *base, const struct worklist_entry *entry)
{
    return worklist_put(model->worklist, base, entry);
}

int model_delist(struct model *model, const struct base *base, uint64_t number)
{
    return worklist_remove(model->worklist, base, number);
}

/* --- reading ------------------------------------------------------------------------------------
 */

const struct worklist *model_worklist(const struct model *model)
{
    return model->worklist;
}

uint64_t model_stale_below(const struct model *model)
{
    return model->latest - model->latest / STALE_SHARE;
}

int model_next_stale(struct model *model, const struct base *base, uint64_t *ret_number)
{
    struct worklist_entry entry;
    int result = worklist_next_stale(model->worklist, base, model_stale_below(model), &entry);
    if (result == 0) {
        *ret_number = entry.number;
    }
    return result;
}

double model_gap_chance(const struct model *model, const struct worklist_entry *entry,
                        const struct worklist_gap *gap)
{
    return model_is_unused(model, gap->tag)
               ? 0.0
               : model_missing_chance(model, gap->tag, (double)gap->score, (double)entry->promise);
}

/* --- ranking ------------------------------------------------------------------------------------
 */

static int compare_ranked(const void *left, const void *right)
{
    const struct model_ranked *a = left;
    const struct model_ranked *b = right;
    if (a->expected != b->expected) {
        return a->expected > b->expected ? -1 : 1;
    }
    return (a->number > b->number) - (a->number < b->number);
}

/* What an entry promises. `propensities` are by tag, worked out once for all entries. */
static double promise_of(const struct model *model, const struct worklist_entry *entry,
                         uint32_t tag, double floor, const double *propensities)
{
    double expected = 0.0;
    for (uint32_t i = 0; i < entry->gap_count; i++) {
        const struct worklist_gap *gap = &entry->gaps[i];
        if ((tag != MODEL_ANY_TAG && gap->tag != tag) || model_is_unused(model, gap->tag)) {
            continue;
        }
        double propensity = propensities[gap->tag];
        double chance = model_missing_of_belongs(
            model, gap->tag, propensity,
            calibrators_chance(&model->curves, propensity, (double)gap->score),
            (double)entry->promise);
        expected += chance >= floor ? chance : 0.0;
    }
    return expected;
}

struct ranking {
    struct model_ranked *items;
    size_t count;
    size_t capacity;
};

static int rank_item(struct ranking *ranking, uint64_t number, double expected)
{
    if (expected <= 0.0) {
        return 0;
    }
    if (GROW(&ranking->items, &ranking->capacity, ranking->count + 1) < 0) {
        return -ENOMEM;
    }
    ranking->items[ranking->count++] =
        (struct model_ranked){.expected = expected, .number = number};
    return 0;
}

/* The items that promise something, by number. */
static int rank_items(const struct model *model, const struct base *base, uint32_t tag,
                      double floor, const double *propensities, struct ranking *ranking)
{
    struct worklist_entry entry = {.number = 0};
    int result = GROW(&ranking->items, &ranking->capacity, 1); /* there is a list without items */
    while (result == 0) {
        result = worklist_after(model->worklist, base, entry.number, &entry);
        if (result == 0 && !knows_tags(model, &entry)) {
            result = -EIO;
        }
        if (result == 0) {
            result = rank_item(ranking, entry.number,
                               promise_of(model, &entry, tag, floor, propensities));
        }
    }
    return result == -ENOENT ? 0 : result;
}

int model_rank_worklist(const struct model *model, const struct base *base, uint32_t tag,
                        double floor, struct model_ranked **ret_ranked, size_t *ret_count)
{
    double *propensities = calloc(model->tag_count + 1, sizeof *propensities);
    if (!propensities) {
        return -ENOMEM;
    }
    for (size_t i = 0; i < model->tag_count; i++) {
        propensities[i] = model_propensity(model, (uint32_t)i);
    }
    struct ranking ranking = {0};
    int result = rank_items(model, base, tag, floor, propensities, &ranking);
    free(propensities);
    if (result < 0) {
        free(ranking.items);
        return result;
    }
    qsort(ranking.items, ranking.count, sizeof *ranking.items, compare_ranked);
    *ret_ranked = ranking.items;
    *ret_count = ranking.count;
    return 0;
}
