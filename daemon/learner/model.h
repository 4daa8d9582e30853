/*
 * model: all that learning reads and changes, as of one point in the sequence of changes: counts of
 * items, words and tags, the weights, the normaliser and the calibrator. Pure: features and tag
 * numbers in, numbers out; no clock, no I/O.
 *
 * It is a function of the sequence of model_learn calls alone: the same items in the same order
 * give the same numbers to the last bit, also when it was stored and restored in between.
 *
 * Not locked: many threads may ask (each with its own scratch) while none learns.
 */
#ifndef UNDERTAG_MODEL_H
#define UNDERTAG_MODEL_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "daemon/learner/calibration.h"
#include "daemon/learner/propensity.h"
#include "daemon/learner/weights.h"
#include "daemon/text/features.h"
#include "daemon/text/siphash.h"

struct model;
struct model_scratch;

struct model_settings {
    struct weights_settings weights;
    struct propensity_curve curve;
    bool correction; /* weigh given pairs by 2/p - 1; off: every pair counts once */
    bool even_out;   /* divide the factors by their running mean over given pairs */
    double balance;  /* β of the effective number of samples; 0: off */
    double step;     /* η; 0: by the vocabulary and the loss */
    double evidence_half_life_items;
};

/* An item as the learner sees it; all borrowed for the call. Tags are numbers, none twice. */
struct model_item {
    const struct feature *features;
    size_t feature_count;
    const uint32_t *tags;
    size_t tag_count;
    const uint32_t *prompted; /* those of `tags` that were examined (p = 1) */
    size_t prompted_count;
};

enum {
    MODEL_WHY_WORDS = 8,
    MODEL_MOST_GAPS = 1000
};

struct model_question {
    const struct feature *features;
    size_t feature_count;
    const uint32_t *given; /* what the item has; never proposed */
    size_t given_count;
    const uint32_t *excluded; /* never proposed either, and not counted as missing */
    size_t excluded_count;
    bool tagged;  /* the item is tagged: chances are P(missing | not given), otherwise P(belongs) */
    size_t most;  /* at most MODEL_MOST_GAPS */
    double floor; /* the least chance shown */
    bool why;
};

struct model_gap {
    uint32_t tag;
    double chance;
    double score;
    size_t word_count;
    struct {
        uint32_t feature; /* place in the question's features */
        double share;     /* of the positive part of the score */
    } words[MODEL_WHY_WORDS];
};

struct model_answer {
    const struct model_gap *gaps; /* by falling chance; valid until the scratch is used again */
    size_t gap_count;
    double expected; /* tags missing (or belonging), over all tags that some item has */
    bool early;
};

int model_new(const struct model_settings *settings, const struct siphash_key *key,
              struct model **ret_model) __attribute__((warn_unused_result));
void model_free(struct model *model);

int model_scratch_new(struct model_scratch **ret_scratch) __attribute__((warn_unused_result));
void model_scratch_free(struct model_scratch *scratch);

/*
 * Learns one change: `item` is what was filed (NULL: the item was withdrawn), `replaced` what it
 * takes the place of (NULL: nothing; its counts leave with it). Counts move first; then the item is
 * scored with what was known so far, which is evidence for the calibrator if it is new; then it is
 * learned. Returns 0 or -ENOMEM, after which the model must not be used any more.
 */
int model_learn(struct model *model, const struct model_item *item,
                const struct model_item *replaced, struct model_scratch *scratch)
    __attribute__((warn_unused_result));

/* The tags that an item most probably lacks; a tag that no item has (any more) is never one of
 * them. Returns 0 or -ENOMEM. */
int model_ask(const struct model *model, const struct model_question *question,
              struct model_scratch *scratch, struct model_answer *ret_answer)
    __attribute__((warn_unused_result));

struct model_size {
    uint64_t documents;
    uint64_t words;
    uint64_t tags;
    uint64_t postings;
    uint64_t dictionary_bytes;
    uint64_t weights_bytes;
    uint64_t counts_bytes;
};

void model_measure(const struct model *model, struct model_size *ret_size);

#endif
