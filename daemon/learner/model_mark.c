/*
 * The item at hand: what is known of its tags, by tag, and the best of those that its words touch.
 */
#include <errno.h>

#include "daemon/grow.h"
#include "daemon/learner/model.h"
#include "daemon/learner/model_private.h"

/* --- the item's tags, by tag --------------------------------------------------------------------
 */

static void mark(struct model_scratch *scratch, size_t limit, const uint32_t *tags, size_t count,
                 enum model_mark mark)
{
    for (size_t i = 0; i < count; i++) {
        if (tags[i] < limit) {
            scratch->barred[tags[i]] = (uint8_t)mark;
        }
    }
}

int model_mark_item(const struct model *model, const struct model_item *item,
                    struct model_scratch *scratch)
{
    size_t limit = model->tag_count;
    if (GROW(&scratch->barred, &scratch->barred_capacity, limit) < 0) {
        return -ENOMEM;
    }
    mark(scratch, limit, item->known_not, item->known_not_count, MARK_KNOWN_NOT);
    mark(scratch, limit, item->tags, item->tag_count, MARK_GIVEN);
    mark(scratch, limit, item->examined, item->examined_count, MARK_EXAMINED);
    return 0;
}

void model_unmark_item(const struct model_item *item, struct model_scratch *scratch)
{
    size_t limit = scratch->barred_capacity;
    mark(scratch, limit, item->known_not, item->known_not_count, MARK_NONE);
    mark(scratch, limit, item->tags, item->tag_count, MARK_NONE);
}

/* --- the best tags ------------------------------------------------------------------------------
 */

enum standing_band model_band_of(const struct model *model, uint32_t tag)
{
    return standing_band_of((double)model->tags[tag].count);
}

static void add_best(const struct model *model, const struct weights_rival *rivals, size_t count,
                     const float *own, struct candidates best[STANDING_BANDS])
{
    for (size_t i = 0; i < count; i++) {
        uint32_t tag = rivals[i].tag;
        float score = rivals[i].score - (own ? own[tag] : 0.0F);
        if (score > WEIGHTS_FLOOR_SCORE && !model_is_unused(model, tag)) {
            candidates_add(&best[model_band_of(model, tag)], tag, score);
        }
    }
}

static void find_best(const struct model *model, const struct model_scratch *scratch,
                      enum weights_lane lane, const float *own,
                      struct candidates best[STANDING_BANDS])
{
    for (size_t b = 0; b < STANDING_BANDS; b++) {
        best[b].count = 0;
    }
    size_t count = 0;
    const struct weights_rival *rivals = weights_rivals(scratch->weights, lane, &count);
    add_best(model, rivals, count, own, best);
}

void model_find_best(const struct model *model, struct model_scratch *scratch)
{
    find_best(model, scratch, WEIGHTS_MAIN, scratch->own, scratch->best);
    add_best(model, scratch->lifted, scratch->lifted_count, scratch->own, scratch->best);
}

void model_find_best_of_shadow(const struct model *model, const struct model_scratch *scratch,
                               struct candidates best[STANDING_BANDS])
{
    find_best(model, scratch, WEIGHTS_SHADOW, NULL, best);
}

bool model_was_known(const struct model *model, const struct model_scratch *scratch, uint32_t tag,
                     double score)
{
    enum model_mark mark = (enum model_mark)scratch->barred[tag];
    uint32_t own = mark == MARK_GIVEN || mark == MARK_EXAMINED ? 1 : 0;
    return model->tags[tag].count > own || score > CALIBRATORS_FLOOR_SCORE;
}
