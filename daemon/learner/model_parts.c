#include "daemon/learner/model_parts.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/learner/model_private.h"
#include "daemon/learner/part_marks.h"

struct tag_putting {
    const struct model *model;
    const struct model_sink *sink;
};

static int put_tag(void *user, uint32_t number)
{
    const struct tag_putting *putting = user;
    const struct model *model = putting->model;
    const struct tag_counts *counts = &model->tags[number];
    struct model_tag tag = {.number = number,
                            .count = counts->count,
                            .unprompted = counts->unprompted,
                            .trial_halves = counts->trial_halves,
                            .given_halves = counts->given_halves,
                            .bias = weights_bias(model->weights, WEIGHTS_MAIN, number),
                            .shadow_bias = weights_bias(model->weights, WEIGHTS_SHADOW, number),
                            .given_count = weights_tag_count(model->weights, number)};
    return putting->sink->tag(putting->sink->user, &tag);
}

static int put_weights(const struct model *model, const struct model_sink *sink)
{
    int result = weights_cut_chunks(model->weights, sink->cut_chunk, sink->user);
    if (result == 0) {
        result = weights_changed_chunks(model->weights, sink->chunk, sink->user);
    }
    struct tag_putting putting = {.model = model, .sink = sink};
    return result == 0 ? weights_changed_tags(model->weights, put_tag, &putting) : result;
}

/* --- figures ------------------------------------------------------------------------------------
 */

static int put_figures(const struct model_sink *sink, enum model_figures_kind kind, size_t number,
                       const void *values, size_t bytes)
{
    const struct model_figures figures = {.kind = kind,
                                          .number = (uint32_t)number,
                                          .count = bytes / sizeof(double),
                                          .values = values};
    return sink->figures(sink->user, &figures);
}

static int put_agreement(const struct agreement *agreement, const struct model_sink *sink)
{
    int result = 0;
    for (size_t r = 0; r < AGREEMENT_PROMISES && result == 0; r++) {
        result = put_figures(sink, MODEL_FIGURES_AGREEMENT, r, &agreement->rows[r],
                             sizeof agreement->rows[r]);
    }
    return result == 0 ? put_figures(sink, MODEL_FIGURES_AGREEMENT, AGREEMENT_PROMISES,
                                     &agreement->gain, sizeof agreement->gain)
                       : result;
}

static int put_calibrators(const struct model *model, const struct model_sink *sink)
{
    bool curves_changed = model->curves_changed || model->sealed.curves;
    bool evidence_changed = model->evidence_changed || model->sealed.evidence || curves_changed;
    int result = 0;
    for (size_t b = 0; b < CALIBRATORS_BINS && result == 0; b++) {
        if (model->calibrators.changed[b] || model->sealed.bins[b]) {
            result = put_figures(sink, MODEL_FIGURES_BIN, b, &model->calibrators.bins[b],
                                 sizeof model->calibrators.bins[b]);
        }
    }
    for (size_t g = 0; g < CALIBRATORS_GROUPS && result == 0 && curves_changed; g++) {
        result = put_figures(sink, MODEL_FIGURES_CURVE, g, &model->curves.groups[g],
                             sizeof model->curves.groups[g]);
    }
    if (result == 0 && evidence_changed) {
        result = put_agreement(&model->agreement, sink);
    }
    if (result == 0 && curves_changed) {
        result = put_figures(sink, MODEL_FIGURES_LEAST, 0, model->least, sizeof model->least);
    }
    if (result == 0 && (model->fit_changed || model->sealed.fit)) {
        result = put_figures(sink, MODEL_FIGURES_FIT, 0, &model->fit, sizeof model->fit);
    }
    return result;
}

static int put_standing(const struct model *model, const struct model_sink *sink)
{
    double values[STANDING_PART_VALUES];
    int result = 0;
    for (size_t part = 0; part < standing_part_count() && result == 0; part++) {
        if (standing_part_changed(model->standing, part)) {
            size_t count = standing_part_get(model->standing, part, values);
            result =
                put_figures(sink, MODEL_FIGURES_STANDING, part, values, count * sizeof *values);
        }
    }
    return result;
}

static int put_worklist(const struct model *model, const struct model_sink *sink)
{
    double values[WORKLIST_PART_VALUES];
    int result = worklist_changes(model->worklist, sink->listed, sink->delisted, sink->user);
    for (size_t part = 0; part < worklist_part_count() && result == 0; part++) {
        if (worklist_part_changed(model->worklist, part)) {
            size_t count = worklist_part_get(model->worklist, part, values);
            result =
                put_figures(sink, MODEL_FIGURES_WORKLIST, part, values, count * sizeof *values);
        }
    }
    return result;
}

static struct model_totals totals_of(const struct model *model)
{
    struct model_totals totals = {.documents = model->documents,
                                  .factor_count = model->factor_count,
                                  .factor_sum = model->factor_sum,
                                  .latest = model->latest,
                                  .evidence_items = model->evidence_items,
                                  .curves_items = model->curves_items,
                                  .fit_halves = model->fit_halves,
                                  .evidence_gain = model->calibrators.gain,
                                  .postings = weights_postings(model->weights),
                                  .pruned = weights_pruned(model->weights),
                                  .rehearsal = model->rehearsal,
                                  .examples = model->examples};
    dictionary_totals(model->dictionary, &totals.words);
    return totals;
}

int model_changes(const struct model *model, const struct model_sink *sink)
{
    int result = dictionary_changes(model->dictionary, sink->word, sink->forgotten, sink->user);
    if (result == 0) {
        result = put_weights(model, sink);
    }
    if (result == 0) {
        result = put_calibrators(model, sink);
    }
    if (result == 0) {
        result = put_standing(model, sink);
    }
    if (result == 0) {
        result = put_worklist(model, sink);
    }
    if (result == 0) {
        const struct model_totals totals = totals_of(model);
        result = sink->totals(sink->user, &totals);
    }
    return result;
}

static void seal_figures(struct model *model)
{
    part_marks_seal(model->calibrators.changed, model->sealed.bins, CALIBRATORS_BINS);
    model->sealed.evidence |= model->evidence_changed;
    model->sealed.curves |= model->curves_changed;
    model->sealed.fit |= model->fit_changed;
    model->evidence_changed = false;
    model->curves_changed = false;
    model->fit_changed = false;
    standing_seal(model->standing);
}

int model_seal(struct model *model)
{
    if (weights_seal(model->weights) < 0 || worklist_seal(model->worklist) < 0) {
        return -ENOMEM; /* a part may be sealed, and comes out again */
    }
    seal_figures(model);
    return 0;
}

bool model_seal_words(struct model *model)
{
    return dictionary_seal(model->dictionary);
}

/* The words last, and a step of them beside nothing else: all else is done with the first call. */
bool model_stored(struct model *model)
{
    weights_stored(model->weights);
    worklist_stored(model->worklist);
    standing_stored(model->standing);
    model->sealed = (struct figures_sealed){0};
    return dictionary_stored(model->dictionary);
}

void model_clean(struct model *model)
{
    dictionary_clean(model->dictionary);
    weights_clean(model->weights);
    worklist_clean(model->worklist);
    seal_figures(model);
    standing_stored(model->standing);
    model->sealed = (struct figures_sealed){0};
}

/* --- restoring ----------------------------------------------------------------------------------
 */

int model_restore_tag(struct model *model, const struct model_tag *tag)
{
    if (model_reserve_tags(model, (size_t)tag->number + 1) < 0) {
        return -ENOMEM;
    }
    model_set_tag_counts(model, tag->number,
                         (struct tag_counts){.count = tag->count,
                                             .unprompted = tag->unprompted,
                                             .trial_halves = tag->trial_halves,
                                             .given_halves = tag->given_halves});
    model->trial_halves += tag->trial_halves;
    int result = weights_restore_bias(model->weights, WEIGHTS_MAIN, tag->number, tag->bias);
    if (result == 0) {
        result = weights_restore_count(model->weights, tag->number, tag->given_count);
    }
    return result == 0 && model->settings.shadow
               ? weights_restore_bias(model->weights, WEIGHTS_SHADOW, tag->number, tag->shadow_bias)
               : result;
}

/* Copies a list into plain numbers of exactly its size. */
static int restore_plain(void *into, size_t bytes, const struct model_figures *figures)
{
    if (figures->count * sizeof *figures->values != bytes) {
        return -EINVAL;
    }
    memcpy(into, figures->values, bytes);
    return 0;
}

int model_restore_figures(struct model *model, const struct model_figures *figures)
{
    uint32_t number = figures->number;
    switch (figures->kind) {
    case MODEL_FIGURES_BIN:
        return number < CALIBRATORS_BINS
                   ? restore_plain(&model->calibrators.bins[number],
                                   sizeof model->calibrators.bins[number], figures)
                   : -EINVAL;
    case MODEL_FIGURES_CURVE:
        return number < CALIBRATORS_GROUPS
                   ? restore_plain(&model->curves.groups[number],
                                   sizeof model->curves.groups[number], figures)
                   : -EINVAL;
    case MODEL_FIGURES_LEAST:
        return number == 0 ? restore_plain(model->least, sizeof model->least, figures) : -EINVAL;
    case MODEL_FIGURES_AGREEMENT:
        if (number == AGREEMENT_PROMISES) {
            return restore_plain(&model->agreement.gain, sizeof model->agreement.gain, figures);
        }
        return number < AGREEMENT_PROMISES
                   ? restore_plain(&model->agreement.rows[number],
                                   sizeof model->agreement.rows[number], figures)
                   : -EINVAL;
    case MODEL_FIGURES_FIT:
        return number == 0 ? restore_plain(&model->fit, sizeof model->fit, figures) : -EINVAL;
    case MODEL_FIGURES_STANDING:
        return standing_part_restore(model->standing, number, figures->values, figures->count);
    case MODEL_FIGURES_WORKLIST:
        return worklist_part_restore(model->worklist, number, figures->values, figures->count);
    default:
        return -EINVAL;
    }
}

int model_restore_totals(struct model *model, const struct model_totals *totals)
{
    model->documents = totals->documents;
    model->factor_count = totals->factor_count;
    model->factor_sum = totals->factor_sum;
    model->latest = totals->latest;
    model->evidence_items = totals->evidence_items;
    model->curves_items = totals->curves_items;
    model->fit_halves = totals->fit_halves;
    model->calibrators.gain = totals->evidence_gain;
    model->growth = propensity_growth((double)model->documents);
    model->rehearsal = totals->rehearsal;
    model->examples = totals->examples;
    weights_restore_postings(model->weights, totals->postings, totals->pruned);
    return dictionary_restore_totals(model->dictionary, &totals->words);
}

int model_restored(struct model *model)
{
    model->version++;
    memset(model->calibrators.changed, 0, sizeof model->calibrators.changed);
    model->evidence_changed = false;
    model->curves_changed = false;
    standing_clean(model->standing);
    return worklist_restored(model->worklist);
}
