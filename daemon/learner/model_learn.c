#include <errno.h>
#include <math.h>
#include <stdlib.h>

#include "daemon/grow.h"
#include "daemon/learner/model.h"
#include "daemon/learner/model_private.h"

/* Vocabularies of at least this many tags learn with the larger step. */
enum {
    LARGE_VOCABULARY = 2000
};

/* --- counts: what an item brings in and takes with it -------------------------------------------
 */

static int count_words_in(struct model *model, const struct model_item *item,
                          struct model_scratch *scratch)
{
    if (GROW(&scratch->words, &scratch->words_capacity, item->feature_count) < 0) {
        return -ENOMEM;
    }
    for (size_t i = 0; i < item->feature_count; i++) {
        const struct feature *feature = &item->features[i];
        uint32_t word = 0;
        int result = dictionary_intern(model->dictionary, scratch->base, feature->term,
                                       feature->term_bytes, &word);
        if (result < 0) {
            return result;
        }
        uint32_t count = dictionary_count(model->dictionary, word) + 1;
        dictionary_set_count(model->dictionary, word, count);
        scratch->words[i] = (struct base_word){.number = word, .count = count};
    }
    return 0;
}

/* Takes one item out of a word's count; a word that no item holds any more is forgotten. */
static int count_word_out(struct model *model, const struct feature *feature,
                          const struct base *base)
{
    uint32_t word = 0;
    int result =
        dictionary_intern(model->dictionary, base, feature->term, feature->term_bytes, &word);
    if (result < 0) {
        return result;
    }
    uint32_t count = dictionary_count(model->dictionary, word);
    if (count > 1) {
        dictionary_set_count(model->dictionary, word, count - 1);
        return 0;
    }
    dictionary_remove(model->dictionary, word);
    return weights_forget_word(model->weights, base, word);
}

static int count_words_out(struct model *model, const struct model_item *item,
                           const struct base *base)
{
    int result = 0;
    for (size_t i = 0; i < item->feature_count && result == 0; i++) {
        result = count_word_out(model, &item->features[i], base);
    }
    return result;
}

static bool is_examined(const struct model_item *item, uint32_t tag)
{
    return model_holds(item->examined, item->examined_count, tag);
}

static int count_tags_in(struct model *model, const struct model_item *item)
{
    for (size_t i = 0; i < item->tag_count; i++) {
        uint32_t tag = item->tags[i];
        if (model_reserve_tags(model, (size_t)tag + 1) < 0 ||
            weights_mark_tag(model->weights, tag) < 0) {
            return -ENOMEM;
        }
        struct tag_counts counts = model->tags[tag];
        counts.count++;
        counts.unprompted += is_examined(item, tag) ? 0 : 1;
        model_set_tag_counts(model, tag, counts);
    }
    return 0;
}

static int count_tags_out(struct model *model, const struct model_item *item)
{
    for (size_t i = 0; i < item->tag_count; i++) {
        uint32_t tag = item->tags[i];
        struct tag_counts counts = model->tags[tag];
        counts.count -= counts.count > 0 ? 1 : 0;
        counts.unprompted -= counts.unprompted > 0 && !is_examined(item, tag) ? 1 : 0;
        model_set_tag_counts(model, tag, counts);
        if (weights_mark_tag(model->weights, tag) < 0) {
            return -ENOMEM;
        }
    }
    return 0;
}

/* Adds an item's trials to its tags, or takes them out again. */
static int count_trials(struct model *model, const struct model_item *item, int sign)
{
    for (size_t i = 0; i < item->trial_count; i++) {
        const struct model_trial *trial = &item->trials[i];
        if (model_reserve_tags(model, (size_t)trial->tag + 1) < 0 ||
            weights_mark_tag(model->weights, trial->tag) < 0) {
            return -ENOMEM;
        }
        struct tag_counts *counts = &model->tags[trial->tag];
        counts->trial_halves += (uint32_t)(sign * trial->halves);
        counts->given_halves += (uint32_t)(sign * trial->given_halves);
        model->trial_halves += (uint64_t)(int64_t)(sign * trial->halves);
    }
    return 0;
}

/* Trials move last: what was shown of a pair knew nothing of the trial that it has become. */
static int move_trials(struct model *model, const struct model_item *item,
                       const struct model_item *replaced)
{
    if ((item && count_trials(model, item, 1) < 0) ||
        (replaced && count_trials(model, replaced, -1) < 0)) {
        return -ENOMEM;
    }
    return model_refit_propensities(model);
}

/* What is new comes in before what is old leaves, so that a word of both is not forgotten. */
static int move_counts(struct model *model, const struct model_item *item,
                       const struct model_item *replaced, struct model_scratch *scratch)
{
    bool same_words = item && replaced && item->same_words;
    int result = 0;
    if (item) {
        result = same_words ? 0 : count_words_in(model, item, scratch);
        if (result == 0) {
            result = count_tags_in(model, item);
        }
        model->documents++;
    }
    if (replaced && result == 0) {
        result = same_words ? 0 : count_words_out(model, replaced, scratch->base);
        if (result == 0) {
            result = count_tags_out(model, replaced);
        }
        model->documents--;
    }
    model->growth = propensity_growth((double)model->documents);
    return result;
}

/* --- learning -----------------------------------------------------------------------------------
 */

/* Before it is divided by the running mean. */
static double plain_factor(const struct model *model, uint32_t tag, bool is_examined_pair)
{
    const struct model_settings *settings = &model->settings;
    double factor = 1.0;
    if (settings->correction && !is_examined_pair) {
        factor = surrogate_given_factor(model_propensity(model, tag));
    }
    if (settings->balance > 0.0) {
        factor *= propensity_balance_factor(settings->balance, (double)model->tags[tag].count);
    }
    return factor;
}

double model_given_factor(struct model *model, uint32_t tag, bool is_examined_pair)
{
    double factor = plain_factor(model, tag, is_examined_pair);
    if (!model->settings.even_out) {
        return factor;
    }
    model->factor_sum += factor;
    model->factor_count++;
    return factor * (double)model->factor_count / model->factor_sum;
}

/*
 * The same of a pair that is learned again: 1.15·f^1.15. Measured on two corpora: the power lifts
 * the tail (by .01 and .02) and PSP@5 (by .003 and .008), and with both the scores of pairs not
 * given, on which the chances rest, stay about where they were: with f alone they fall, so that
 * chances of the torso come out .03 too small; with 2·f chances of the head .06 too large.
 */
static const double AGAIN_TIMES = 1.15;
static const double AGAIN_POWER = 1.15;

static double again_factor(const struct model *model, uint32_t tag, bool is_examined_pair)
{
    double factor = plain_factor(model, tag, is_examined_pair);
    if (model->settings.even_out && model->factor_count > 0) {
        factor *= (double)model->factor_count / model->factor_sum;
    }
    return AGAIN_TIMES * pow(factor, AGAIN_POWER);
}

/*
 * The logistic loss slopes by 1 at most, the squared hinge by 4 at the base: with the same step it
 * learns too little in one pass. Measured on two corpora: P@1 .834 with 1, .872 with 8 and 10.
 */
static const double LOGISTIC_STEPS = 8.0;

bool model_is_large(const struct model *model)
{
    return model->tag_count >= LARGE_VOCABULARY;
}

double model_step(const struct model *model)
{
    if (model->settings.step > 0.0) {
        return model->settings.step;
    }
    double step = model_is_large(model) ? 0.5 : 0.3;
    return model->settings.weights.surrogate == SURROGATE_LOGISTIC ? LOGISTIC_STEPS * step : step;
}

/*
 * Of the step with which items are learned: .1 and .05 with the defaults. Larger ones gain no more,
 * and move scores, and with them chances, further.
 */
static const double REHEARSAL_PART_SMALL = 1.0 / 3.0;
static const double REHEARSAL_PART_LARGE = 0.1;

double model_rehearsal_step(const struct model *model)
{
    return model_step(model) *
           (model_is_large(model) ? REHEARSAL_PART_LARGE : REHEARSAL_PART_SMALL);
}

/* The item's tags, as each lane counts them: the shadow learns what everybody would, that every
 * pair counts once. */
static int fill_given(struct model *model, const struct model_item *item, bool again,
                      struct model_scratch *scratch)
{
    if (GROW(&scratch->given, &scratch->given_capacity, item->tag_count) < 0) {
        return -ENOMEM;
    }
    for (size_t i = 0; i < item->tag_count; i++) {
        uint32_t tag = item->tags[i];
        double factor = again ? again_factor(model, tag, is_examined(item, tag))
                              : model_given_factor(model, tag, is_examined(item, tag));
        scratch->given[i] =
            (struct weights_given){.tag = tag,
                                   .tag_count = model->tags[tag].count,
                                   .factors = {[WEIGHTS_MAIN] = factor, [WEIGHTS_SHADOW] = 1.0}};
    }
    return 0;
}

int model_learn_weights(struct model *model, const struct model_item *item, bool again,
                        struct worklist_entry *entry, struct model_scratch *scratch)
{
    uint32_t watched[WORKLIST_GAPS];
    float moves[WORKLIST_GAPS];
    for (uint32_t i = 0; i < entry->pair_count; i++) {
        watched[i] = entry->pairs[i].tag;
    }
    if (fill_given(model, item, again, scratch) < 0) {
        return -ENOMEM;
    }
    const struct weights_example example = {.number = ++model->examples,
                                            .x = scratch->x,
                                            .count = scratch->x_count,
                                            .lanes = model_lanes(model),
                                            .given = scratch->given,
                                            .given_count = item->tag_count,
                                            .step = again ? model_rehearsal_step(model)
                                                          : model_step(model),
                                            .watched = watched,
                                            .watched_count = entry->pair_count,
                                            .moves = moves};
    int result = weights_learn(model->weights, &example, scratch->weights);
    for (uint32_t i = 0; i < entry->pair_count && result == 0; i++) {
        entry->pairs[i].own += moves[i];
    }
    return result;
}

int model_score_lanes(struct model *model, struct model_scratch *scratch)
{
    int result = weights_admit(model->weights, scratch->base, scratch->x, scratch->x_count);
    return result == 0 ? weights_score(model->weights, scratch->base, scratch->x, scratch->x_count,
                                       model_lanes(model), scratch->weights)
                       : result;
}

static int score(struct model *model, const struct model_item *item, struct model_scratch *scratch)
{
    int result = model_weigh_features(model, item->features, item->feature_count, true, scratch);
    return result == 0 ? model_score_lanes(model, scratch) : result;
}

/* The item's scores before it is learned: as evidence where it is new, and for its entry. */
static int take_stock(struct model *model, const struct model_item *item,
                      const struct model_item *replaced, struct model_scratch *scratch,
                      struct worklist_entry *ret_entry)
{
    struct worklist_entry listed;
    int result =
        replaced ? model_find_entry(model, scratch->base, replaced->number, &listed) : -ENOENT;
    if (result < 0 && result != -ENOENT) {
        return result;
    }
    const struct worklist_entry *old = result == 0 ? &listed : NULL;
    if (model_take_own(model, old, scratch) < 0 || model_mark_item(model, item, scratch) < 0) {
        return -ENOMEM;
    }
    model_find_best(model, scratch);
    if (!replaced) {
        model_gather_evidence(model, item, scratch);
    }
    model_make_entry(model, item, scratch, ret_entry);
    model_note_pairs(ret_entry, scratch);
    if (old) {
        model_keep_counted(old, ret_entry);
    }
    model_unmark_item(item, scratch);
    model_clear_own(old, scratch);
    return 0;
}

static int learn_item(struct model *model, const struct model_item *item,
                      const struct model_item *replaced, struct model_scratch *scratch)
{
    struct worklist_entry entry;
    int result = score(model, item, scratch);
    if (result == 0) {
        result = take_stock(model, item, replaced, scratch, &entry);
    }
    if (result == 0) {
        result = model_learn_weights(model, item, false, &entry, scratch);
    }
    if (result == 0 && replaced) {
        result = worklist_remove(model->worklist, scratch->base, replaced->number);
    }
    return result == 0 ? worklist_put(model->worklist, scratch->base, &entry) : result;
}

int model_learn(struct model *model, const struct model_item *item,
                const struct model_item *replaced, struct model_scratch *scratch)
{
    model->version++;
    if (item && item->number > model->latest) {
        model->latest = item->number;
    }
    int result = move_counts(model, item, replaced, scratch);
    if (result < 0) {
        return result;
    }
    if (!item) {
        result = worklist_remove(model->worklist, scratch->base, replaced->number);
    } else if (replaced && item->same_words) {
        result = model_examine(model, item, replaced, scratch);
    } else {
        result = learn_item(model, item, replaced, scratch);
    }
    return result == 0 ? move_trials(model, item, replaced) : result;
}
