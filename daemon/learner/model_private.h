/*
 * model_private: the model's own insides, for the files that are the model together: model (life),
 * model_learn, model_ask and model_parts.
 */
#ifndef UNDERTAG_MODEL_PRIVATE_H
#define UNDERTAG_MODEL_PRIVATE_H

#include "daemon/learner/census.h"
#include "daemon/learner/marks.h"
#include "daemon/learner/model.h"
#include "daemon/text/dictionary.h"

struct tag_counts {
    uint32_t count;
    uint32_t unprompted; /* N_l */
};

/* A term that has left the dictionary but not yet the store. */
struct forgotten_word {
    char *term;
    size_t term_bytes;
    uint32_t number;
};

struct model {
    struct model_settings settings;
    struct dictionary *dictionary;
    struct weights *weights;
    struct tag_counts *tags;
    size_t tag_count; /* tags below this number are known */
    size_t tag_capacity;
    uint32_t census[CENSUS_BINS]; /* tags by unprompted count; sums to tag_count */
    size_t unused_tags;           /* that no item has: never proposed, nothing expected of them */
    struct calibration calibration;
    uint64_t documents;
    uint64_t factor_count;
    double factor_sum;
    uint64_t version; /* rises with every change; no two models ever have the same, none has 0 */

    struct marks changed_words;
    struct forgotten_word *forgotten;
    size_t forgotten_count;
    size_t forgotten_capacity;
};

/*
 * Chances are summed in this unit, as whole numbers: the sum is then the same in whatever order the
 * tags come, and the order differs between a model that ran on and one that was restored.
 */
typedef uint64_t chance_sum;

struct model_scratch {
    struct weights_scratch *weights;
    uint32_t *words; /* by feature: its word, or DICTIONARY_NONE */
    size_t words_capacity;
    float *values; /* by feature: its x */
    size_t values_capacity;
    struct weights_feature *x; /* the known features */
    size_t x_count;
    size_t x_capacity;
    uint32_t *feature_of_x;
    size_t feature_of_x_capacity;
    struct weights_given *given;
    size_t given_capacity;
    uint8_t *barred; /* by tag: given or excluded */
    size_t barred_capacity;
    struct model_gap *gaps;
    size_t gap_capacity;
    float *parts;
    size_t parts_capacity;

    /* What follows from the evidence as of this version of a model; 0: nothing yet. */
    uint64_t version;
    struct calibration_curve curve;
    chance_sum rest_missing[CENSUS_BINS]; /* of one tag of the bin that the item does not touch */
    chance_sum rest_belongs;              /* likewise, whatever the bin */
};

/* Makes room for tags below `count`, with counts of 0. Returns 0 or -ENOMEM. */
int model_reserve_tags(struct model *model, size_t count) __attribute__((warn_unused_result));

/* Moves a tag's counts, and the tag's place in the census with them. */
void model_set_tag_counts(struct model *model, uint32_t tag, struct tag_counts counts);

/* The propensity of a tag as of now. */
double model_propensity(const struct model *model, uint32_t tag);

/*
 * x of the features whose words are in scratch->words: (1 + ln tf)·idf, L2-normalised over all of
 * them, known or not; only known ones go into scratch->x. Returns 0 or -ENOMEM.
 */
int model_weigh_features(const struct model *model, const struct feature *features, size_t count,
                         struct model_scratch *scratch) __attribute__((warn_unused_result));

#endif
