/*
 * The place of a new item in the learner's standing: its proposals before it is learned, by band,
 * and what became of those that the desk was prompted with.
 */
#include <stdlib.h>

#include "daemon/learner/model.h"
#include "daemon/learner/model_private.h"

/* --- the standing -------------------------------------------------------------------------------
 */

/* A proposal on its way into the lists: by falling key, score, then by its tag, as model_ask
 * shows them. */
struct proposed {
    double key;
    double score;
    uint32_t tag;
    struct ranking_proposal proposal;
};

static int compare_proposed(const void *left, const void *right)
{
    const struct proposed *a = left;
    const struct proposed *b = right;
    if (a->key != b->key) {
        return a->key > b->key ? -1 : 1;
    }
    if (a->score != b->score) {
        return a->score > b->score ? -1 : 1;
    }
    return (a->tag > b->tag) - (a->tag < b->tag);
}

/* As it was before the item came: 1 for a pair that somebody pointed out. */
static double propensity_on(const struct model *model, const struct model_scratch *scratch,
                            uint32_t tag)
{
    const struct tag_counts *counts = &model->tags[tag];
    uint32_t own = scratch->barred[tag] == MARK_GIVEN ? 1 : 0;
    return scratch->barred[tag] == MARK_EXAMINED
               ? 1.0
               : propensity_fit_tag_mean_at(&model->fit, (double)(counts->unprompted - own),
                                            model->growth, (double)counts->trial_halves / 2.0,
                                            (double)counts->given_halves / 2.0);
}

/* What the standing is told of one learner. */
struct lists {
    struct ranking_proposal of_band[STANDING_BANDS][RANKING_PLACES];
    struct ranking_list lists[STANDING_BANDS];
};

static void take_list(const struct proposed *proposed, size_t count, enum standing_band band,
                      struct lists *lists)
{
    size_t taken = count < RANKING_PLACES ? count : RANKING_PLACES;
    for (size_t i = 0; i < taken; i++) {
        lists->of_band[band][i] = proposed[i].proposal;
    }
    lists->lists[band] = (struct ranking_list){.proposals = lists->of_band[band], .count = taken};
}

/* The first proposals band by band and of all, by their chance, or as they stand by their score. */
static void fill_lists(const struct model *model, const struct model_scratch *scratch,
                       const struct candidates best[STANDING_BANDS], bool by_chance,
                       struct lists *lists)
{
    struct proposed all[STANDING_BANDS * CANDIDATES_MOST] = {0};
    size_t count = 0;
    for (enum standing_band band = STANDING_HEAD; band < STANDING_BANDS; band++) {
        struct proposed *of_band = all + count;
        for (size_t i = 0; i < best[band].count; i++) {
            uint32_t tag = best[band].tags[i];
            double score = (double)best[band].scores[i];
            all[count++] = (struct proposed){
                .key = by_chance ? model_belongs_chance(model, tag, score) : score,
                .score = score,
                .tag = tag,
                .proposal = {.propensity = propensity_on(model, scratch, tag),
                             .is_hit = scratch->barred[tag] == MARK_GIVEN ||
                                       scratch->barred[tag] == MARK_EXAMINED}};
        }
        qsort(of_band, best[band].count, sizeof *of_band, compare_proposed);
        take_list(of_band, best[band].count, band, lists);
    }
    qsort(all, count, sizeof *all, compare_proposed);
    take_list(all, count, STANDING_ALL, lists);
}

/* The propensities of the item's tags, band by band, in `room` for twice as many as there are. */
static void fill_truths(const struct model *model, const struct model_item *item,
                        const struct model_scratch *scratch, double *room,
                        struct ranking_truth truths[STANDING_BANDS])
{
    for (size_t i = 0; i < item->tag_count; i++) {
        room[i] = propensity_on(model, scratch, item->tags[i]);
    }
    truths[STANDING_ALL] = (struct ranking_truth){.propensities = room, .count = item->tag_count};
    double *next = room + item->tag_count;
    for (enum standing_band band = STANDING_HEAD; band < STANDING_BANDS; band++) {
        truths[band] = (struct ranking_truth){.propensities = next};
        for (size_t i = 0; i < item->tag_count; i++) {
            if (model_band_of(model, item->tags[i]) == band) {
                next[truths[band].count++] = room[i];
            }
        }
        next += truths[band].count;
    }
}

enum {
    TRUTH_TAGS = 1000 /* an item with more counts with these */
};

void model_stand(struct model *model, const struct model_item *item,
                 const struct model_scratch *scratch)
{
    double room[2 * TRUTH_TAGS];
    struct ranking_truth truths[STANDING_BANDS];
    struct lists with;
    struct lists without;
    struct model_item short_item = *item;
    short_item.tag_count = item->tag_count < TRUTH_TAGS ? item->tag_count : TRUTH_TAGS;
    fill_truths(model, &short_item, scratch, room, truths);
    fill_lists(model, scratch, scratch->best, true, &with);
    bool has_shadow = model->settings.shadow;
    if (has_shadow) {
        struct candidates best[STANDING_BANDS];
        model_find_best_of_shadow(model, scratch, best);
        fill_lists(model, scratch, best, false, &without);
    }
    standing_add(model->standing, truths, with.lists, has_shadow ? without.lists : NULL);
}

/* --- proposals that the desk was prompted with --------------------------------------------------
 */

void model_rate_prompts(struct model *model, const struct model_item *item,
                        const struct model_scratch *scratch)
{
    for (size_t i = 0; i < item->examined_count; i++) {
        uint32_t tag = item->examined[i];
        double score = (double)model_score(model, scratch, tag);
        if (model_was_known(model, scratch, tag, score)) {
            standing_ruled(model->standing, model_belongs_chance(model, tag, score), true);
        }
    }
    for (size_t i = 0; i < item->known_not_count; i++) {
        uint32_t tag = item->known_not[i];
        if (tag < model->tag_count && !model_is_unused(model, tag)) {
            double score = (double)model_score(model, scratch, tag);
            standing_ruled(model->standing, model_belongs_chance(model, tag, score), false);
        }
    }
}
