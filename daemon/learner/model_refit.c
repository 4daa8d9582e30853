/*
 * Fitting what follows from evidence, every now and then.
 */
#include <errno.h>
#include <math.h>
#include <stdlib.h>

#include "daemon/learner/model.h"
#include "daemon/learner/model_private.h"

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

int model_refit_propensities(struct model *model)
{
    uint64_t halves = model->trial_halves;
    uint64_t moved =
        halves > model->fit_halves ? halves - model->fit_halves : model->fit_halves - halves;
    bool has_grown = halves > 0 && (double)model->documents > REFIT_GROWTH * model->fit.documents;
    bool has_moved = moved > 0 && moved >= model->fit_halves / REFIT_TRIALS_SHARE;
    if (!has_grown && !has_moved) {
        return 0;
    }
    struct propensity_evidence *evidence = calloc(model->tag_count + 1, sizeof *evidence);
    if (!evidence) {
        return -ENOMEM; /* not the fit as it was: when it is fitted must not depend on memory */
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
    return 0;
}
