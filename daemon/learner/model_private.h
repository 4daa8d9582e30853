/*
 * model_private: the model's own insides, for the files that are the model together: model (life),
 * model_learn (one change), model_mark (the item at hand), model_evidence, model_agreement and
 * model_standing (what its scores say before it is learned), model_examine (what people say),
 * model_refit, model_worklist, model_rehearse, model_ask and model_parts.
 */
#ifndef UNDERTAG_MODEL_PRIVATE_H
#define UNDERTAG_MODEL_PRIVATE_H

#include "daemon/learner/agreement.h"
#include "daemon/learner/calibrators.h"
#include "daemon/learner/candidates.h"
#include "daemon/learner/census.h"
#include "daemon/learner/marks.h"
#include "daemon/learner/model.h"
#include "daemon/text/dictionary.h"

struct tag_counts {
    uint32_t count;
    uint32_t unprompted; /* N_l */
    uint32_t trial_halves;
    uint32_t given_halves;
};

/* Figures that are on their way to the store. */
struct figures_sealed {
    uint8_t bins[CALIBRATORS_BINS];
    bool evidence;
    bool curves;
    bool fit;
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
    uint64_t documents;
    double growth;   /* propensity_growth of them */
    uint64_t latest; /* the greatest number of an item so far */

    struct calibrators calibrators;   /* evidence */
    struct calibrators_curves curves; /* as last fitted to it */
    struct agreement agreement;
    double least[CALIBRATORS_CLASSES]; /* of the propensities, as the evidence has it */
    uint64_t evidence_items;           /* items behind the evidence */
    uint64_t curves_items;             /* … when the curves were fitted */
    uint64_t trial_halves;             /* over all tags */
    uint64_t fit_halves;               /* … when the propensities were fitted */
    struct propensity_fit fit;
    struct standing *standing;
    struct worklist *worklist;
    bool evidence_changed;
    bool curves_changed;
    bool fit_changed;
    struct figures_sealed sealed;

    uint64_t factor_count;
    double factor_sum;
    struct model_rehearsal rehearsal;
    uint64_t examples; /* learned so far; what chance rounds by */
    uint64_t version;  /* rises with every change; no two models ever have the same, none has 0 */
};

/*
 * Chances are summed in this unit, as whole numbers: the sum is then the same in whatever order the
 * tags come, and the order differs between a model that ran on and one that was restored.
 */
typedef uint64_t chance_sum;

struct model_scratch {
    const struct base *base; /* through which its owner's thread reads; NULL: nothing is stored */
    struct weights_scratch *weights;
    struct base_word *words; /* by feature: its word, or DICTIONARY_NONE */
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
    chance_sum rest_missing[CENSUS_BINS]; /* of one tag of the bin that the item does not touch */
    chance_sum rest_belongs[CENSUS_BINS]; /* likewise */
    double most_of_rest;                  /* the greatest of those chances */

    struct candidates
        best[STANDING_BANDS]; /* of the item scored last; [STANDING_ALL] is not used */
    float *own; /* by tag: the item's own share, to be taken out of its score; otherwise 0 */
    size_t own_capacity;
    /* Tags that only their own share has pushed down to the floor: no rivals, but candidates. */
    struct weights_rival lifted[WORKLIST_GAPS];
    size_t lifted_count;
    uint32_t *changed; /* tags of which something has become known */
    size_t changed_capacity;
};

/* What is known of a tag of the item at hand, in scratch->barred. */
enum model_mark {
    MARK_NONE,
    MARK_GIVEN,
    MARK_EXAMINED, /* on the item, pointed out by somebody */
    MARK_KNOWN_NOT
};

/* Makes room for tags below `count`, with counts of 0. Returns 0 or -ENOMEM. */
int model_reserve_tags(struct model *model, size_t count) __attribute__((warn_unused_result));

/* Moves a tag's counts, and the tag's place in the census with them. */
void model_set_tag_counts(struct model *model, uint32_t tag, struct tag_counts counts);

/* P(belongs) of a tag with this score, and P(missing | not given) of one on an item that
 * promises so much (model_promise). */
double model_belongs_chance(const struct model *model, uint32_t tag, double score);
double model_missing_chance(const struct model *model, uint32_t tag, double score, double promise);

/* The same from P(belongs), with the tag's propensity. */
double model_missing_of_belongs(const struct model *model, uint32_t tag, double propensity,
                                double belongs, double promise);

/* A propensity, or the least that the evidence allows for tags as common as this. */
double model_allowed_propensity(const struct model *model, uint32_t tag, double propensity);

/* A tag that no item has (any more): all that the learner knows of it may be a mistake. */
static inline bool model_is_unused(const struct model *model, uint32_t tag)
{
    return model->tags[tag].count == 0;
}

static inline float model_score(const struct model *model, const struct model_scratch *scratch,
                                uint32_t tag)
{
    return weights_tag_score(model->weights, scratch->weights, WEIGHTS_MAIN, tag);
}

/* Whether a rising list of tags holds one. */
bool model_holds(const uint32_t *tags, size_t count, uint32_t tag);

/*
 * x of the features whose words are in scratch->words: (1 + ln tf)·idf, L2-normalised over all of
 * them, known or not; only known ones go into scratch->x. An item weighs the same before it is
 * counted in as after: `is_counted` says which it is. Returns 0 or -ENOMEM.
 */
int model_weigh_features(const struct model *model, const struct feature *features, size_t count,
                         bool is_counted, struct model_scratch *scratch)
    __attribute__((warn_unused_result));

/* Finds the features' words. Returns 0, -ENOMEM or -EIO. */
int model_find_words(const struct model *model, const struct feature *features, size_t count,
                     struct model_scratch *scratch) __attribute__((warn_unused_result));

/* Scores words as they are known: those of a filed item, which is counted in, or of a draft, which
 * is not. Returns 0, -ENOMEM or -EIO. */
int model_score_words(const struct model *model, const struct feature *features, size_t count,
                      bool is_counted, struct model_scratch *scratch)
    __attribute__((warn_unused_result));

/* How many times a given pair counts: the correction for missing tags, the balance of classes, and
 * both relative to their running mean. */
double model_given_factor(struct model *model, uint32_t tag, bool is_examined);

/* Lanes of the weights that learn what items have. */
static inline size_t model_lanes(const struct model *model)
{
    return model->settings.shadow ? WEIGHTS_LANES : 1;
}

/* Learns the item just scored, for the first time or again (rehearsal), in all lanes; what that
 * moves of the entry's pairs becomes their own share. Returns 0 or -ENOMEM. */
int model_learn_weights(struct model *model, const struct model_item *item, bool again,
                        struct worklist_entry *entry, struct model_scratch *scratch)
    __attribute__((warn_unused_result));

/* Brings the postings of the words just weighed into memory and scores them in all lanes. Returns
 * 0, -ENOMEM or -EIO. */
int model_score_lanes(struct model *model, struct model_scratch *scratch)
    __attribute__((warn_unused_result));

/* η for the next example, and for one that is rehearsed. */
double model_step(const struct model *model);
double model_rehearsal_step(const struct model *model);

/* Whether there are so many tags that steps differ from those for a few hundred. */
bool model_is_large(const struct model *model);

/* --- model_mark: the item at hand --- */

/* Marks the item's tags in scratch->barred, and clears them. */
int model_mark_item(const struct model *model, const struct model_item *item,
                    struct model_scratch *scratch) __attribute__((warn_unused_result));
void model_unmark_item(const struct model_item *item, struct model_scratch *scratch);

/* Whether a tag of the marked item was there before it: one used for the first time by this very
 * item, with no weights from one withdrawn since, could not have been proposed. */
bool model_was_known(const struct model *model, const struct model_scratch *scratch, uint32_t tag,
                     double score);

enum standing_band model_band_of(const struct model *model, uint32_t tag);

/* Fills scratch->best with the best touched tags of each band, the item's own share taken out; or
 * `best` by the scores of the shadow. */
void model_find_best(const struct model *model, struct model_scratch *scratch);
void model_find_best_of_shadow(const struct model *model, const struct model_scratch *scratch,
                               struct candidates best[STANDING_BANDS]);

/* --- model_agreement: of the item just scored and marked, with scratch->best filled --- */

/* What the likely tags promise together, those checked left out. */
double model_promise(const struct model *model, uint32_t checked_below,
                     const struct model_scratch *scratch);

/* Counts a new item's likely pairs as evidence for the agreement. */
void model_count_agreement(struct model *model, const struct model_scratch *scratch);

/* --- model_standing: likewise, of a new item --- */

void model_stand(struct model *model, const struct model_item *item,
                 const struct model_scratch *scratch);
void model_rate_prompts(struct model *model, const struct model_item *item,
                        const struct model_scratch *scratch);

/* --- model_evidence: likewise --- */

/* The item's pairs as evidence, its place in the standing, and what its proposals say of the
 * chances. */
void model_gather_evidence(struct model *model, const struct model_item *item,
                           struct model_scratch *scratch);

/* --- model_refit --- */

/* Fits curves and propensities again where enough has come in, or `now`. */
void model_refit_curves(struct model *model, bool now);
int model_refit_propensities(struct model *model) __attribute__((warn_unused_result));

/* --- model_worklist --- */

/* Puts what the entry says of the own shares of the item just scored into scratch->own, and takes
 * it out again. */
int model_take_own(const struct model *model, const struct worklist_entry *entry,
                   struct model_scratch *scratch) __attribute__((warn_unused_result));
void model_clear_own(const struct worklist_entry *entry, struct model_scratch *scratch);

/* Notes the entry's gaps as the pairs that are about to be learned, with the own shares that an
 * earlier filing has left in scratch->own. */
void model_note_pairs(struct worklist_entry *entry, const struct model_scratch *scratch);

/* A revision's pairs were counted when the item was filed, with the scores of that day. */
void model_keep_counted(const struct worklist_entry *old, struct worklist_entry *entry);

/* The entry of the item just scored and marked, with scratch->best filled, but for its pairs. */
void model_make_entry(const struct model *model, const struct model_item *item,
                      const struct model_scratch *scratch, struct worklist_entry *ret_entry);

/* --- model_examine --- */

/* Counts as examined, and not belonging, the gaps of an item that a check of all tags `below` has
 * gone through: those that it had `before` and has no more. Marked as it is now; `entry` is from
 * before, or NULL. */
void model_count_checked(struct model *model, uint32_t below, const struct model_item *before,
                         const struct worklist_entry *entry, const struct model_scratch *scratch);

/* Learns what has become known of the tags of an item whose words are the same. */
int model_examine(struct model *model, const struct model_item *item,
                  const struct model_item *replaced, struct model_scratch *scratch)
    __attribute__((warn_unused_result));

#endif
