#include "daemon/learner/model.h"

#include <errno.h>
#include <math.h>
#include <stdatomic.h>
#include <stdlib.h>

#include "daemon/grow.h"
#include "daemon/learner/model_chances.h"
#include "daemon/learner/model_private.h"
#include "daemon/text/tfidf.h"

/* What the store takes for a record, its share of half-filled pages included; a posting in it is
 * counted apart. */
static const double PAGE_BYTES = 4096.0;
static const double FILLED_SHARE = 0.6;
static const double CHUNK_BYTES = 64.0;
static const double WORD_BYTES = 128.0;
static const double COUNT_BYTES = 7.0; /* of a word, in the record of many */
static const double TAG_BYTES = 60.0;  /* likewise */

/* Of a changed chunk the store takes what is new (storage/model_chunks.h), which lies in a table of
 * a part of the size, and as many others are settled: the more of these share a page, since they
 * are neighbours. Measured on half a million tags: a page for three. */
static const double NEWS_PART = 12.0; /* MODEL_CHUNKS_NEWS_PART */
static const double NEWS_LEAST_BYTES = 64 * 4096.0;
static const double SETTLED_SHARE = 0.5;

/* So many, measured by the words, which have a chunk or more each, are written whole. */
static const double MANY_SHARE = 0.125;

/*
 * A scratch may outlive its model, and the next model may lie where that one lay: each begins its
 * versions where no other comes to, one beyond a million million changes of the one before.
 */
static uint64_t first_version(void)
{
    static atomic_uint_fast64_t models_made;
    return (atomic_fetch_add(&models_made, 1) + 1) << 40U;
}

int model_new(const struct model_settings *settings, const struct siphash_key *key,
              struct model **ret_model)
{
    struct model *made = calloc(1, sizeof *made);
    if (!made) {
        return -ENOMEM;
    }
    made->settings = *settings;
    made->version = first_version();
    made->growth = propensity_growth(0.0);
    propensity_fit_default(&settings->curve, &made->fit);
    calibrators_init(&made->calibrators);
    agreement_init(&made->agreement);
    model_refit_curves(made, true);
    made->settings.weights.shadow = settings->shadow;
    if (dictionary_new(key, &made->dictionary) < 0 ||
        weights_new(&made->settings.weights, &made->weights) < 0 ||
        standing_new(&made->standing) < 0 || worklist_new(&made->worklist) < 0) {
        model_free(made);
        return -ENOMEM;
    }
    *ret_model = made;
    return 0;
}

void model_free(struct model *model)
{
    if (!model) {
        return;
    }
    dictionary_free(model->dictionary);
    weights_free(model->weights);
    standing_free(model->standing);
    worklist_free(model->worklist);
    free(model->tags);
    free(model);
}

int model_scratch_new(struct model_scratch **ret_scratch)
{
    struct model_scratch *made = calloc(1, sizeof *made);
    if (!made) {
        return -ENOMEM;
    }
    if (weights_scratch_new(&made->weights) < 0) {
        model_scratch_free(made);
        return -ENOMEM;
    }
    *ret_scratch = made;
    return 0;
}

void model_scratch_free(struct model_scratch *scratch)
{
    if (!scratch) {
        return;
    }
    weights_scratch_free(scratch->weights);
    free(scratch->words);
    free(scratch->values);
    free(scratch->x);
    free(scratch->feature_of_x);
    free(scratch->given);
    free(scratch->own);
    free(scratch->changed);
    free(scratch->barred);
    free(scratch->gaps);
    free(scratch->parts);
    free(scratch);
}

void model_scratch_read(struct model_scratch *scratch, const struct base *base)
{
    scratch->base = base;
}

uint64_t model_scratch_bytes(const struct model_scratch *scratch)
{
    return sizeof *scratch + weights_scratch_bytes(scratch->weights) + scratch->barred_capacity +
           scratch->own_capacity * sizeof *scratch->own +
           scratch->gap_capacity * sizeof *scratch->gaps +
           scratch->parts_capacity * sizeof *scratch->parts;
}

int model_reserve_tags(struct model *model, size_t count)
{
    if (count <= model->tag_count) {
        return 0;
    }
    if (GROW(&model->tags, &model->tag_capacity, count) < 0 ||
        weights_reserve_tags(model->weights, count) < 0) {
        return -ENOMEM;
    }
    model->census[0] += (uint32_t)(count - model->tag_count);
    model->unused_tags += count - model->tag_count;
    model->tag_count = count;
    return 0;
}

void model_set_tag_counts(struct model *model, uint32_t tag, struct tag_counts counts)
{
    model->census[census_bin(model->tags[tag].unprompted)]--;
    model->census[census_bin(counts.unprompted)]++;
    model->unused_tags -= model->tags[tag].count == 0;
    model->unused_tags += counts.count == 0;
    model->tags[tag] = counts;
}

double model_propensity(const struct model *model, uint32_t tag)
{
    const struct tag_counts *counts = &model->tags[tag];
    return propensity_fit_tag_mean_at(&model->fit, (double)counts->unprompted, model->growth,
                                      (double)counts->trial_halves / 2.0,
                                      (double)counts->given_halves / 2.0);
}

double model_belongs_chance(const struct model *model, uint32_t tag, double score)
{
    return calibrators_chance(&model->curves, model_propensity(model, tag), score);
}

double model_allowed_propensity(const struct model *model, uint32_t tag, double propensity)
{
    return fmax(propensity,
                model->least[calibrators_class(model->tags[tag].unprompted, model->documents)]);
}

double model_tag_allowed_propensity(const struct model *model, uint32_t tag)
{
    return model_allowed_propensity(model, tag, model_propensity(model, tag));
}

double model_missing_of_belongs(const struct model *model, uint32_t tag, double propensity,
                                double belongs, double promise)
{
    double allowed = model_allowed_propensity(model, tag, propensity);
    double missing = propensity_missing_chance(allowed, belongs);
    if (missing < MODEL_AGREED_FROM) {
        return missing;
    }
    double of_others = promise - (belongs >= AGREEMENT_LEAST ? missing : 0.0);
    double agreed = agreement_chance(&model->agreement, of_others, missing);
    /* By and by, so that the order of two gaps does not turn round at the border. */
    double share = fmin((missing - MODEL_AGREED_FROM) / MODEL_AGREED_FROM, 1.0);
    return (1.0 - share) * missing + share * agreed;
}

double model_missing_chance(const struct model *model, uint32_t tag, double score, double promise)
{
    double propensity = model_propensity(model, tag);
    return model_missing_of_belongs(model, tag, propensity,
                                    calibrators_chance(&model->curves, propensity, score), promise);
}

bool model_holds(const uint32_t *tags, size_t count, uint32_t tag)
{
    size_t from = 0;
    while (count > 0) {
        size_t half = count / 2;
        if (tags[from + half] == tag) {
            return true;
        }
        if (tags[from + half] < tag) {
            from += half + 1;
            count -= half + 1;
        } else {
            count = half;
        }
    }
    return false;
}

const struct propensity_fit *model_fit(const struct model *model)
{
    return &model->fit;
}

const struct calibrators_curves *model_curves(const struct model *model)
{
    return &model->curves;
}

const struct agreement *model_agreement(const struct model *model)
{
    return &model->agreement;
}

double model_least_of_class(const struct model *model, size_t tag_class)
{
    return model->least[tag_class];
}

const struct standing *model_standing(const struct model *model)
{
    return model->standing;
}

int model_weigh_features(const struct model *model, const struct feature *features, size_t count,
                         bool is_counted, struct model_scratch *scratch)
{
    const double itself = is_counted ? 0.0 : 1.0;
    if (GROW(&scratch->values, &scratch->values_capacity, count) < 0 ||
        GROW(&scratch->x, &scratch->x_capacity, count) < 0 ||
        GROW(&scratch->feature_of_x, &scratch->feature_of_x_capacity, count) < 0) {
        return -ENOMEM;
    }
    for (size_t i = 0; i < count; i++) {
        double holding = fmax((double)scratch->words[i].count + itself, 1.0);
        double share = holding > 1.0 ? 1.0 : MODEL_UNSHARED_WORD_SHARE;
        scratch->values[i] = (float)(share * tfidf_frequency_weight((double)features[i].frequency) *
                                     tfidf_idf((double)model->documents + itself, holding));
    }
    tfidf_normalise(scratch->values, count);
    scratch->x_count = 0;
    for (size_t i = 0; i < count; i++) {
        const struct base_word *word = &scratch->words[i];
        if (word->number == DICTIONARY_NONE) {
            continue;
        }
        scratch->feature_of_x[scratch->x_count] = (uint32_t)i;
        scratch->x[scratch->x_count++] = (struct weights_feature){
            .word = word->number, .document_count = word->count, .value = scratch->values[i]};
    }
    return 0;
}

int model_find_words(const struct model *model, const struct feature *features, size_t count,
                     struct model_scratch *scratch)
{
    if (GROW(&scratch->words, &scratch->words_capacity, count) < 0) {
        return -ENOMEM;
    }
    for (size_t i = 0; i < count; i++) {
        int result = dictionary_find(model->dictionary, scratch->base, features[i].term,
                                     features[i].term_bytes, &scratch->words[i]);
        if (result == -ENOENT) {
            scratch->words[i] = (struct base_word){.number = DICTIONARY_NONE};
        } else if (result < 0) {
            return result;
        }
    }
    return 0;
}

int model_score_words(const struct model *model, const struct feature *features, size_t count,
                      bool is_counted, struct model_scratch *scratch)
{
    int result = model_find_words(model, features, count, scratch);
    if (result == 0) {
        result = model_weigh_features(model, features, count, is_counted, scratch);
    }
    return result == 0 ? weights_score(model->weights, scratch->base, scratch->x, scratch->x_count,
                                       1, scratch->weights)
                       : result;
}

void model_trim(struct model *model, uint64_t dictionary_most, uint64_t weights_most)
{
    dictionary_trim(model->dictionary, dictionary_most);
    weights_trim(model->weights, weights_most);
}

/* The pages that so many records take while they are stored, of a table of so many bytes: the
 * expected number of pages of which at least one record is among them, drawn alike. */
static uint64_t pages_of(double records, double table_bytes)
{
    double pages = 1.0 + table_bytes / PAGE_BYTES;
    return (uint64_t)(pages * -expm1(-records / pages) * PAGE_BYTES);
}

/* The pages of so many changed chunks. */
static uint64_t chunk_pages(const struct model *model, double chunks)
{
    double words = (double)dictionary_size(model->dictionary);
    double postings = (double)weights_postings(model->weights);
    double table = words * CHUNK_BYTES +
                   postings * (double)weights_posting_bytes(model->weights) / FILLED_SHARE;
    if (chunks > MANY_SHARE * words) {
        return pages_of(chunks, table);
    }
    return pages_of(chunks, NEWS_LEAST_BYTES + table / NEWS_PART) +
           pages_of(SETTLED_SHARE * chunks, table);
}

uint64_t model_changed_bytes(const struct model *model)
{
    uint64_t chunks = weights_changed_count(model->weights);
    double words = (double)dictionary_size(model->dictionary);
    return 2 * chunks * weights_chunk_bytes(model->weights) + /* in memory, and as collected */
           2 * worklist_bytes(model->worklist) +              /* likewise */
           chunk_pages(model, (double)chunks) +
           pages_of((double)dictionary_changed_count(model->dictionary), words * COUNT_BYTES) +
           pages_of((double)dictionary_changed_terms(model->dictionary), words * WORD_BYTES) +
           pages_of((double)weights_changed_tag_count(model->weights),
                    (double)model->tag_count * TAG_BYTES);
}

void model_measure(const struct model *model, struct model_size *ret_size)
{
    *ret_size = (struct model_size){
        .documents = model->documents,
        .words = dictionary_size(model->dictionary),
        .tags = model->tag_count,
        .postings = weights_postings(model->weights),
        .pruned = weights_pruned(model->weights),
        .dictionary_bytes = dictionary_bytes(model->dictionary),
        .weights_bytes = weights_bytes(model->weights),
        .weights_tag_bytes = weights_tag_bytes(model->weights),
        .counts_bytes = sizeof *model + model->tag_capacity * sizeof *model->tags +
                        standing_bytes(model->standing),
        .worklist_bytes = worklist_bytes(model->worklist),
        .listed = worklist_size(model->worklist),
        .stale = worklist_count_stale(model->worklist, model_stale_below(model))};
}

double model_bias(const struct model *model, uint32_t tag)
{
    return (double)weights_bias(model->weights, WEIGHTS_MAIN, tag).value;
}

int model_read_chunk(const struct model *model, struct base_bytes chunk,
                     struct weights_pair ret_pairs[WEIGHTS_CHUNK_PAIRS])
{
    return weights_read_chunk(model->weights, chunk, ret_pairs);
}
