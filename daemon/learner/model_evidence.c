/*
 * What the scores of an item say before it is learned (progressive figures; Dawid 1984): each of
 * its pairs is evidence for the calibrators.
 */
#include <math.h>

#include "daemon/learner/model.h"
#include "daemon/learner/model_private.h"

/* --- pairs as evidence --------------------------------------------------------------------------
 */

/* The class by the other items' counts, whether this one has the tag or not. */
static size_t class_of(const struct model *model, const struct model_scratch *scratch, uint32_t tag)
{
    uint32_t own = scratch->barred[tag] == MARK_GIVEN ? 1 : 0;
    return calibrators_class(model->tags[tag].unprompted - own, model->documents);
}

/* Tags by class, but for those that no item has. */
static void count_classes(const struct model *model, double rest[CALIBRATORS_CLASSES])
{
    for (size_t c = 0; c < CALIBRATORS_CLASSES; c++) {
        rest[c] = 0.0;
    }
    for (size_t b = 0; b < CENSUS_BINS; b++) {
        if (model->census[b] > 0) {
            uint32_t middle = (uint32_t)census_middle(b);
            rest[calibrators_class(middle, model->documents)] += (double)model->census[b];
        }
    }
    rest[calibrators_class(0, model->documents)] -= (double)model->unused_tags;
}

/* The class under which count_classes has counted a tag: with this item. */
static size_t counted_class(const struct model *model, uint32_t tag)
{
    size_t bin = census_bin(model->tags[tag].unprompted);
    return calibrators_class((uint32_t)census_middle(bin), model->documents);
}

static void count_touched(struct model *model, const struct model_scratch *scratch,
                          double rest[CALIBRATORS_CLASSES])
{
    size_t count = 0;
    const struct weights_rival *rivals = weights_rivals(scratch->weights, WEIGHTS_MAIN, &count);
    for (size_t i = 0; i < count; i++) {
        uint32_t tag = rivals[i].tag;
        double score = (double)rivals[i].score;
        if (score <= CALIBRATORS_FLOOR_SCORE || model_is_unused(model, tag)) {
            continue;
        }
        size_t class = class_of(model, scratch, tag);
        rest[counted_class(model, tag)] -= 1.0;
        if (scratch->barred[tag] < MARK_EXAMINED) {
            calibrators_add_pair(&model->calibrators, score, class);
        }
    }
}

static void count_tag(struct model *model, const struct model_scratch *scratch, uint32_t tag,
                      double rest[CALIBRATORS_CLASSES])
{
    double score = (double)model_score(model, scratch, tag);
    size_t class = class_of(model, scratch, tag);
    bool is_at_floor = score <= CALIBRATORS_FLOOR_SCORE;
    if (!model_was_known(model, scratch, tag, score)) {
        rest[counted_class(model, tag)] -= 1.0;
        return;
    }
    rest[counted_class(model, tag)] -= is_at_floor ? 1.0 : 0.0;
    if (scratch->barred[tag] != MARK_GIVEN) {
        calibrators_add_known(&model->calibrators, score, class,
                              scratch->barred[tag] == MARK_EXAMINED);
        return;
    }
    if (is_at_floor) {
        calibrators_add_pair(&model->calibrators, score, class);
    }
    calibrators_add_given(&model->calibrators, score, class);
}

static void count_pairs(struct model *model, const struct model_item *item,
                        const struct model_scratch *scratch)
{
    double rest[CALIBRATORS_CLASSES];
    count_classes(model, rest);
    count_touched(model, scratch, rest);
    for (size_t i = 0; i < item->tag_count; i++) {
        count_tag(model, scratch, item->tags[i], rest);
    }
    for (size_t i = 0; i < item->known_not_count; i++) {
        uint32_t tag = item->known_not[i];
        if (tag < model->tag_count && !model_is_unused(model, tag)) {
            count_tag(model, scratch, tag, rest);
        }
    }
    for (size_t c = 0; c < CALIBRATORS_CLASSES; c++) {
        calibrators_add_rest(&model->calibrators, c, fmax(rest[c], 0.0));
    }
}

void model_gather_evidence(struct model *model, const struct model_item *item,
                           struct model_scratch *scratch)
{
    model_stand(model, item, scratch);
    model_rate_prompts(model, item, scratch);
    calibrators_age(&model->calibrators, model->settings.evidence_half_life_items);
    model->evidence_items++;
    model_count_agreement(model, scratch);
    count_pairs(model, item, scratch);
    if (item->checked_below > 0) { /* all is learned again, and the filing's record is gone */
        struct model_item before = *item;
        before.checked_below = 0;
        model_count_checked(model, item->checked_below, &before, NULL, scratch);
    }
    model->evidence_changed = true;
    model_refit_curves(model, false);
}
