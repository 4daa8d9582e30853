/*
 * What an item's likely tags promise together, and what each new item says of such promises
 * (agreement.h).
 */
#include "daemon/learner/model.h"
#include "daemon/learner/model_private.h"

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

void model_count_agreement(struct model *model, const struct model_scratch *scratch)
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
