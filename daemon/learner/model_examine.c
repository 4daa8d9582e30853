/*
 * What people say of an item after it was filed: a ruling or a check makes pairs known that were
 * not. They are evidence for the calibrators (where a gap was examined), say whether the chances
 * shown hold, and are learned as pairs of their own; the item's other pairs were learned when it
 * was filed.
 */
#include <errno.h>
#include <math.h>

#include "daemon/grow.h"
#include "daemon/learner/model.h"
#include "daemon/learner/model_private.h"

/* What is less likely is not proposed, unless somebody asks for it. */
static const double LEAST_PROPOSED = 0.05;

/* The tags of one list that are not in another; into scratch->changed behind `at`. */
static int add_new(const uint32_t *tags, size_t count, const uint32_t *before, size_t before_count,
                   struct model_scratch *scratch, size_t *at)
{
    if (GROW(&scratch->changed, &scratch->changed_capacity, *at + count) < 0) {
        return -ENOMEM;
    }
    for (size_t i = 0; i < count; i++) {
        if (!model_holds(before, before_count, tags[i])) {
            scratch->changed[(*at)++] = tags[i];
        }
    }
    return 0;
}

/* Tags of which something has become known: found to belong, then found not to. */
struct findings {
    const uint32_t *found;
    size_t found_count;
    const uint32_t *denied;
    size_t denied_count;
};

static int find_changes(const struct model *model, const struct model_item *item,
                        const struct model_item *replaced, struct model_scratch *scratch,
                        struct findings *ret_findings)
{
    size_t count = 0;
    if (GROW(&scratch->changed, &scratch->changed_capacity, 1) < 0) {
        return -ENOMEM;
    }
    if (add_new(item->tags, item->tag_count, replaced->tags, replaced->tag_count, scratch, &count) <
        0) {
        return -ENOMEM;
    }
    size_t found_count = count;
    if (add_new(item->known_not, item->known_not_count, replaced->known_not,
                replaced->known_not_count, scratch, &count) < 0) {
        return -ENOMEM;
    }
    /* What a check has taken off. */
    for (size_t i = 0; i < replaced->tag_count; i++) {
        uint32_t tag = replaced->tags[i];
        if (!model_holds(item->tags, item->tag_count, tag) &&
            !model_holds(item->known_not, item->known_not_count, tag) &&
            add_new(&tag, 1, NULL, 0, scratch, &count) < 0) {
            return -ENOMEM;
        }
    }
    size_t denied_count = 0;
    uint32_t *denied = scratch->changed + found_count;
    for (size_t i = 0; i < count - found_count; i++) {
        if (denied[i] < model->tag_count) { /* some item has had it */
            denied[denied_count++] = denied[i];
        }
    }
    *ret_findings = (struct findings){.found = scratch->changed,
                                      .found_count = found_count,
                                      .denied = denied,
                                      .denied_count = denied_count};
    return 0;
}

/* --- gaps that were examined --------------------------------------------------------------------
 */

/* What is known of how a pair was counted when the item came in. */
struct counted_pair {
    double score;
    size_t class;
    double weight; /* of the pair's evidence by now */
};

static struct counted_pair recall(const struct model *model, const struct worklist_entry *entry,
                                  const struct model_scratch *scratch, uint32_t tag)
{
    struct counted_pair pair = {
        .score = (double)model_score(model, scratch, tag) - (double)scratch->own[tag],
        .class = calibrators_class(model->tags[tag].unprompted, model->documents),
        .weight = 1.0};
    if (entry) {
        pair.weight = calibrators_weight((double)(model->evidence_items - entry->counted),
                                         model->settings.evidence_half_life_items);
    }
    for (uint32_t i = 0; entry && i < entry->pair_count; i++) {
        if (entry->pairs[i].tag == tag) {
            pair.score = (double)entry->pairs[i].counted;
        }
    }
    return pair;
}

/* A gap: not given, and nobody had examined it. */
static bool was_gap(const struct model_item *replaced, uint32_t tag)
{
    return tag >= replaced->checked_below &&
           !model_holds(replaced->tags, replaced->tag_count, tag) &&
           !model_holds(replaced->known_not, replaced->known_not_count, tag);
}

/* What is needed to count what was found. */
struct examining {
    struct model *model;
    const struct model_item *replaced;
    const struct worklist_entry *entry; /* of the item as it was; NULL: none */
    struct model_scratch *scratch;
    double promise;         /* of the item as it was */
    uint32_t checked_below; /* of the item as it is */
    bool is_check;
};

/* A ruling on what was proposed says whether its chance held; a check finds what it finds, proposed
 * or not. */
static void rate(const struct examining *examining, uint32_t tag, double score, bool belongs)
{
    double chance = model_missing_chance(examining->model, tag, score, examining->promise);
    if (!examining->is_check && chance >= LEAST_PROPOSED) {
        standing_ruled(examining->model->standing, chance, belongs);
    }
}

static void count_finding(const struct examining *examining, uint32_t tag, bool belongs)
{
    struct model *model = examining->model;
    const struct model_item *replaced = examining->replaced;
    const struct model_scratch *scratch = examining->scratch;
    double now = (double)model_score(model, scratch, tag) - (double)scratch->own[tag];
    if (belongs && !model_was_known(model, scratch, tag, now)) {
        return; /* opened by this very change */
    }
    struct counted_pair pair = recall(model, examining->entry, scratch, tag);
    if (was_gap(replaced, tag)) {
        rate(examining, tag, now, belongs);
        calibrators_add_ruled(&model->calibrators, pair.score, pair.class, pair.weight, belongs);
    } else if (!belongs && model_holds(replaced->tags, replaced->tag_count, tag) &&
               !model_holds(replaced->examined, replaced->examined_count, tag)) {
        calibrators_take_off(&model->calibrators, pair.score, pair.class, pair.weight);
    }
}

/* --- a check: all other gaps are known not to belong --------------------------------------------
 */

void model_count_checked(struct model *model, uint32_t below, const struct model_item *before,
                         const struct worklist_entry *entry, const struct model_scratch *scratch)
{
    double rest[CALIBRATORS_CLASSES] = {0};
    double weight = 1.0;
    if (entry) {
        weight = calibrators_weight((double)(model->evidence_items - entry->counted),
                                    model->settings.evidence_half_life_items);
    }
    for (uint32_t tag = 0; tag < model->tag_count && tag < below; tag++) {
        if (model_is_unused(model, tag) || scratch->barred[tag] != MARK_NONE ||
            !was_gap(before, tag)) {
            continue;
        }
        struct counted_pair pair = {
            .score = -1.0,
            .class = calibrators_class(model->tags[tag].unprompted, model->documents)};
        if (weights_is_touched(scratch->weights, tag)) {
            pair = recall(model, entry, scratch, tag);
        }
        if (pair.score > CALIBRATORS_FLOOR_SCORE) {
            calibrators_add_ruled(&model->calibrators, pair.score, pair.class, weight, false);
        } else {
            rest[pair.class] += 1.0;
        }
    }
    for (size_t c = 0; c < CALIBRATORS_CLASSES; c++) {
        calibrators_rule_rest(&model->calibrators, c, weight, rest[c]);
    }
}

/* --- the whole ----------------------------------------------------------------------------------
 */

static void gather(const struct examining *examining, const struct findings *findings)
{
    for (size_t i = 0; i < findings->found_count; i++) {
        count_finding(examining, findings->found[i], true);
    }
    for (size_t i = 0; i < findings->denied_count; i++) {
        count_finding(examining, findings->denied[i], false);
    }
    if (examining->is_check) {
        model_count_checked(examining->model, examining->checked_below, examining->replaced,
                            examining->entry, examining->scratch);
    }
}

static int learn_pairs(struct model *model, const struct findings *findings,
                       struct model_scratch *scratch)
{
    if (GROW(&scratch->given, &scratch->given_capacity, findings->found_count) < 0) {
        return -ENOMEM;
    }
    for (size_t i = 0; i < findings->found_count; i++) {
        uint32_t tag = findings->found[i];
        scratch->given[i] =
            (struct weights_given){.tag = tag,
                                   .tag_count = model->tags[tag].count,
                                   .factors = {model_given_factor(model, tag, true)}};
    }
    const struct weights_example example = {.number = ++model->examples,
                                            .x = scratch->x,
                                            .count = scratch->x_count,
                                            .lanes = 1, /* the shadow knows no rulings */
                                            .given = scratch->given,
                                            .given_count = findings->found_count,
                                            .pairs_alone = true,
                                            .denied = findings->denied,
                                            .denied_count = findings->denied_count,
                                            .step = model_step(model)};
    int result = weights_admit(model->weights, scratch->base, scratch->x, scratch->x_count);
    return result == 0 ? weights_learn(model->weights, &example, scratch->weights) : result;
}

/* The entry as it is from now on: without what has become known, under the item's new number. */
static int move_entry(struct model *model, const struct model_item *item,
                      const struct worklist_entry *entry, const struct model_scratch *scratch)
{
    if (!entry) {
        return 0;
    }
    struct worklist_entry moved = *entry;
    uint64_t number = entry->number;
    moved.number = item->number;
    moved.gap_count = 0;
    for (uint32_t i = 0; i < entry->gap_count; i++) {
        uint32_t tag = entry->gaps[i].tag;
        if (scratch->barred[tag] == MARK_NONE && tag >= item->checked_below) {
            moved.gaps[moved.gap_count++] = entry->gaps[i];
        }
    }
    int result = worklist_remove(model->worklist, scratch->base, number);
    return result == 0 ? worklist_put(model->worklist, scratch->base, &moved) : result;
}

/* Scores the item, and says what it promised before anybody had examined it. */
static int look_back(const struct model *model, const struct model_item *item,
                     const struct model_item *replaced, const struct worklist_entry *entry,
                     struct model_scratch *scratch, double *ret_promise)
{
    int result = model_score_words(model, item->features, item->feature_count, true, scratch);
    if (result < 0) {
        return result;
    }
    if (model_take_own(model, entry, scratch) < 0 ||
        model_mark_item(model, replaced, scratch) < 0) {
        return -ENOMEM;
    }
    model_find_best(model, scratch);
    *ret_promise = model_promise(model, replaced->checked_below, scratch);
    model_unmark_item(replaced, scratch);
    return 0;
}

/* All of it, with what the worklist says of the item. */
static int examine(struct examining *examining, const struct model_item *item,
                   struct findings *findings)
{
    struct model *model = examining->model;
    struct model_scratch *scratch = examining->scratch;
    const struct model_item *replaced = examining->replaced;
    int result = look_back(model, item, replaced, examining->entry, scratch, &examining->promise);
    if (result < 0 || model_mark_item(model, item, scratch) < 0) {
        return result < 0 ? result : -ENOMEM;
    }
    gather(examining, findings);
    model->evidence_changed = true;
    result = learn_pairs(model, findings, scratch);
    model_clear_own(examining->entry, scratch);
    if (result == 0) {
        result = move_entry(model, item, examining->entry, scratch);
    }
    model_unmark_item(item, scratch);
    if (findings->found_count + findings->denied_count > 0 || examining->is_check) {
        model_refit_curves(model, true);
    }
    return result;
}

int model_examine(struct model *model, const struct model_item *item,
                  const struct model_item *replaced, struct model_scratch *scratch)
{
    struct findings findings;
    struct worklist_entry listed;
    int result = model_find_entry(model, scratch->base, replaced->number, &listed);
    if (result < 0 && result != -ENOENT) {
        return result;
    }
    struct examining examining = {.model = model,
                                  .replaced = replaced,
                                  .entry = result == 0 ? &listed : NULL,
                                  .scratch = scratch,
                                  .checked_below = item->checked_below,
                                  .is_check = item->checked_below > replaced->checked_below};
    if (find_changes(model, item, replaced, scratch, &findings) < 0) {
        return -ENOMEM;
    }
    return examine(&examining, item, &findings);
}
