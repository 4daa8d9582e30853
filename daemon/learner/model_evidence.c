/*
 * What the scores of an item say before it is learned (progressive figures; Dawid 1984): its pairs
 * are evidence for the calibrators, its proposals for the learner's standing.
 */
#include <errno.h>
#include <math.h>
#include <stdlib.h>

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

static enum standing_band band_of(const struct model *model, uint32_t tag)
{
    return standing_band_of((double)model->tags[tag].count);
}

/* The best touched tags of each band by the scores of one learner. */
static void find_best(const struct model *model, const struct weights *weights,
                      const struct weights_scratch *scored, const float *own,
                      struct candidates best[STANDING_BANDS])
{
    for (size_t b = 0; b < STANDING_BANDS; b++) {
        best[b].count = 0;
    }
    size_t touched_count = 0;
    const uint32_t *touched = weights_touched(scored, &touched_count);
    for (size_t i = 0; i < touched_count; i++) {
        uint32_t tag = touched[i];
        float score = weights_tag_score(weights, scored, tag) - (own ? own[tag] : 0.0F);
        if (score > WEIGHTS_FLOOR_SCORE && !model_is_unused(model, tag)) {
            candidates_add(&best[band_of(model, tag)], tag, score);
        }
    }
}

void model_find_best(const struct model *model, struct model_scratch *scratch)
{
    find_best(model, model->weights, scratch->weights, scratch->own, scratch->best);
}

/* --- agreement ----------------------------------------------------------------------------------
 */

/* How pairs hang together changes more slowly than scores, and takes more evidence to tell. */
static const double AGREEMENT_HALF_LIVES = 8.0;

/* A candidate as the calibrators see it. */
struct rated {
    double propensity;
    double belongs;
    enum model_mark mark;
};

static struct rated rate(const struct model *model, const struct model_scratch *scratch,
                         uint32_t tag, float score)
{
    double propensity = model_propensity(model, tag);
    return (struct rated){.propensity = model_allowed_propensity(model, tag, propensity),
                          .belongs = calibrators_chance(&model->curves, propensity, (double)score),
                          .mark = (enum model_mark)scratch->barred[tag]};
}

/* What a candidate adds to what the item promises. */
static double promise_of(const struct rated *rated)
{
    return rated->mark == MARK_NONE && rated->belongs >= AGREEMENT_LEAST
               ? propensity_missing_chance(rated->propensity, rated->belongs)
               : 0.0;
}

double model_promise(const struct model *model, uint32_t checked_below,
                     const struct model_scratch *scratch)
{
    double promise = 0.0;
    for (enum standing_band band = STANDING_HEAD; band < STANDING_BANDS; band++) {
        const struct candidates *best = &scratch->best[band];
        for (size_t i = 0; i < best->count; i++) {
            const struct rated rated = rate(model, scratch, best->tags[i], best->scores[i]);
            promise += best->tags[i] >= checked_below ? promise_of(&rated) : 0.0;
        }
    }
    return promise;
}

static void count_agreement(struct model *model, const struct model_scratch *scratch)
{
    double promise = model_promise(model, 0, scratch);
    agreement_age(&model->agreement,
                  AGREEMENT_HALF_LIVES * model->settings.evidence_half_life_items);
    for (enum standing_band band = STANDING_HEAD; band < STANDING_BANDS; band++) {
        const struct candidates *best = &scratch->best[band];
        for (size_t i = 0; i < best->count; i++) {
            const struct rated rated = rate(model, scratch, best->tags[i], best->scores[i]);
            double others = promise - promise_of(&rated);
            double missing = propensity_missing_chance(rated.propensity, rated.belongs);
            if (rated.mark == MARK_NONE) {
                agreement_add_not_given(&model->agreement, others, missing);
            } else if (rated.mark == MARK_GIVEN) {
                agreement_add_given(&model->agreement, others, missing, rated.propensity);
            }
        }
    }
}

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

bool model_was_known(const struct model *model, const struct model_scratch *scratch, uint32_t tag,
                     double score)
{
    enum model_mark mark = (enum model_mark)scratch->barred[tag];
    uint32_t own = mark == MARK_GIVEN || mark == MARK_EXAMINED ? 1 : 0;
    return model->tags[tag].count > own || score > CALIBRATORS_FLOOR_SCORE;
}

static void count_touched(struct model *model, const struct model_scratch *scratch,
                          double rest[CALIBRATORS_CLASSES])
{
    size_t touched_count = 0;
    const uint32_t *touched = weights_touched(scratch->weights, &touched_count);
    for (size_t i = 0; i < touched_count; i++) {
        uint32_t tag = touched[i];
        double score = (double)model_score(model, scratch, tag);
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
    struct proposed all[STANDING_BANDS * CANDIDATES_MOST];
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
            if (band_of(model, item->tags[i]) == band) {
                next[truths[band].count++] = room[i];
            }
        }
        next += truths[band].count;
    }
}

enum {
    TRUTH_TAGS = 1000 /* an item with more counts with these */
};

static void stand(struct model *model, const struct model_item *item,
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
    if (model->shadow) {
        struct candidates best[STANDING_BANDS];
        find_best(model, model->shadow, scratch->shadow, NULL, best);
        fill_lists(model, scratch, best, false, &without);
    }
    standing_add(model->standing, truths, with.lists, model->shadow ? without.lists : NULL);
}

/* --- proposals that the desk was prompted with --------------------------------------------------
 */

static void rate_prompts(struct model *model, const struct model_item *item,
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

void model_gather_evidence(struct model *model, const struct model_item *item,
                           struct model_scratch *scratch)
{
    stand(model, item, scratch);
    rate_prompts(model, item, scratch);
    calibrators_age(&model->calibrators, model->settings.evidence_half_life_items);
    model->evidence_items++;
    count_agreement(model, scratch);
    count_pairs(model, item, scratch);
    model->evidence_changed = true;
    model_refit_curves(model, false);
}

/* --- fitting ------------------------------------------------------------------------------------
 */

/* A fit holds for the counts of its time. */
static const double REFIT_GROWTH = 1.25;

/* Curves are fitted again when the evidence has grown by this share, or by so many items. */
enum {
    REFIT_SHARE = 128,
    REFIT_ITEMS = 256,
    REFIT_TRIALS_SHARE = 32
};

void model_refit_curves(struct model *model, bool now)
{
    uint64_t due = model->curves_items / REFIT_SHARE;
    due = due < 1 ? 1 : due;
    due = due > REFIT_ITEMS ? REFIT_ITEMS : due;
    if (!now && model->evidence_items < model->curves_items + due) {
        return;
    }
    double believed[CALIBRATORS_CLASSES];
    for (size_t c = 0; c < CALIBRATORS_CLASSES; c++) {
        double count = calibrators_class_share(c) * (double)model->documents;
        believed[c] = propensity_fit_mean_at(&model->fit, count, model->growth);
    }
    calibrators_least(&model->calibrators, model->least);
    calibrators_fit(&model->calibrators, believed, model->least, &model->curves);
    agreement_fit(&model->agreement);
    model->curves_items = model->evidence_items;
    model->curves_changed = true;
}

void model_refit_propensities(struct model *model)
{
    uint64_t halves = model->trial_halves;
    uint64_t moved =
        halves > model->fit_halves ? halves - model->fit_halves : model->fit_halves - halves;
    bool has_grown = halves > 0 && (double)model->documents > REFIT_GROWTH * model->fit.documents;
    bool has_moved = moved > 0 && moved >= model->fit_halves / REFIT_TRIALS_SHARE;
    if (!has_grown && !has_moved) {
        return;
    }
    struct propensity_evidence *evidence = calloc(model->tag_count + 1, sizeof *evidence);
    if (!evidence) {
        return; /* the fit as it was will do; the next trial tries again */
    }
    size_t count = 0;
    for (size_t tag = 0; tag < model->tag_count; tag++) {
        const struct tag_counts *counts = &model->tags[tag];
        if (counts->trial_halves > 0) {
            evidence[count++] =
                (struct propensity_evidence){.tag_count = (double)counts->unprompted,
                                             .trials = (double)counts->trial_halves / 2.0,
                                             .given = (double)counts->given_halves / 2.0};
        }
    }
    propensity_fit_evidence(&model->settings.curve, evidence, count, (double)model->documents,
                            &model->fit);
    free(evidence);
    model->fit_halves = halves;
    model->fit_changed = true;
    model_refit_curves(model, true);
}
