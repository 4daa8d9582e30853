/*
 * model: all that learning reads and changes, as of one point in the sequence of changes: counts of
 * items, words and tags, the weights, the normaliser, what people have examined, the propensities
 * and calibrators that follow from it, the learner's standing and the worklist. Pure: features and
 * tag numbers in, numbers out; no clock, no I/O.
 *
 * It is a function of the sequence of model_learn calls alone: the same items in the same order
 * give the same numbers to the last bit, also when it was stored and restored in between. (Only how
 * fresh the worklist's scores are, and what was rehearsed, depends on when there was time for it.)
 *
 * Not locked: many threads may ask (each with its own scratch) while none learns.
 */
#ifndef UNDERTAG_MODEL_H
#define UNDERTAG_MODEL_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "daemon/base.h"
#include "daemon/learner/propensity_fit.h"
#include "daemon/learner/standing.h"
#include "daemon/learner/weights.h"
#include "daemon/learner/worklist.h"
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
    bool shadow; /* teach a second learner without the correction, to compare with */
};

/* Goes up when the same changes would teach something else. */
enum {
    MODEL_LEARNER_VERSION = 3
};

/*
 * A look at whether a tag that belongs to an item was given: whole after a check at random, half
 * where a second tagger gave the tag, since two taggers overlook the same things.
 */
struct model_trial {
    uint32_t tag;
    uint8_t halves;       /* 2 or 1 */
    uint8_t given_halves; /* the same, or 0 where it was not given */
};

/*
 * A word that no other item holds cannot speak for a tag yet: it takes part only in the length of
 * x, where it counts for this much. Measured on two corpora, one pass: against 1, tail recall@10
 * rises by .01 to .015 and PSP@5 by .002 to .007.
 */
#define MODEL_UNSHARED_WORD_SHARE 0.5

/* An item as the learner sees it; all borrowed for the call. Tags are numbers, rising. */
struct model_item {
    uint64_t number; /* of its record; rises from change to change */
    const struct feature *features;
    size_t feature_count;
    const uint32_t *tags;
    size_t tag_count;
    const uint32_t *examined; /* those of `tags` that somebody pointed out (p = 1) */
    size_t examined_count;
    const uint32_t *known_not; /* examined, and they do not belong */
    size_t known_not_count;
    uint32_t checked_below; /* somebody went through all tags below this number; 0: nobody did */
    bool same_words;        /* as what it replaces: only what is known of its tags has changed */
    const struct model_trial *trials;
    size_t trial_count;
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
    uint32_t checked_below; /* somebody went through all tags below this number */
    uint64_t number;        /* of a filed item, whose own share is taken out of the scores; 0 */
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
uint64_t model_scratch_bytes(const struct model_scratch *scratch);

/* Whatever uses the scratch reads what is not in memory through this base, until another is named;
 * NULL, as at first: nothing is stored. */
void model_scratch_read(struct model_scratch *scratch, const struct base *base);

/*
 * Learns one change: `item` is what it is now (NULL: the item was withdrawn), `replaced` what it
 * takes the place of (NULL: nothing; its counts leave with it). Counts move first; then the item is
 * scored with what was known so far, which is evidence for the calibrators and the standing if it
 * is new, or if somebody has examined it; then it is learned. Returns 0, -ENOMEM, or -EIO where the
 * base cannot be read; after either the model must not be used any more.
 */
int model_learn(struct model *model, const struct model_item *item,
                const struct model_item *replaced, struct model_scratch *scratch)
    __attribute__((warn_unused_result));

/* The tags that an item most probably lacks; a tag that no item has (any more) is never one of
 * them. Returns 0, -ENOMEM or -EIO. */
int model_ask(const struct model *model, const struct model_question *question,
              struct model_scratch *scratch, struct model_answer *ret_answer)
    __attribute__((warn_unused_result));

/* --- rehearsal: learning filed items again ------------------------------------------------------
 */

struct model_rehearsal {
    uint64_t at;     /* the number of the item whose turn was last; 0 at the start of a round */
    uint64_t turns;  /* that items have had, those included that could not be read */
    uint64_t rounds; /* how often it has come to the last item */
    uint64_t items;  /* rehearsed, over all rounds */
};

struct model_rehearsal model_rehearsal(const struct model *model);

/* Turns that are still due; 0: the model is rehearsed. */
uint64_t model_rehearsals_due(const struct model *model);

/* The number of the item whose turn it is. Returns 0, -ENOENT where there is none for now, -ENOMEM
 * or -EIO. */
int model_next_rehearsal(struct model *model, const struct base *base, uint64_t *ret_number)
    __attribute__((warn_unused_result));

/* Learns that item again. Returns 0, -ENOMEM or -EIO; after either the model must not be used
 * any more. */
int model_rehearse(struct model *model, const struct model_item *item,
                   struct model_scratch *scratch) __attribute__((warn_unused_result));

/* Passes over an item that cannot be read any more. */
void model_skip_rehearsal(struct model *model, uint64_t number);

/* --- the worklist -------------------------------------------------------------------------------
 */

const struct worklist *model_worklist(const struct model *model);

/* The seq below which an entry's scores are called stale: the model has grown by an eighth since.
 */
uint64_t model_stale_below(const struct model *model);

/* The number of the next item whose scores are stale. Returns 0, -ENOENT where none is, -ENOMEM or
 * -EIO. */
int model_next_stale(struct model *model, const struct base *base, uint64_t *ret_number)
    __attribute__((warn_unused_result));

/*
 * Scores a filed item again for the worklist. As it changes only its entry, model_rescore scores
 * and may run while others ask, and model_relist puts the entry in, which may not. Each returns 0,
 * -ENOMEM or -EIO.
 */
int model_rescore(const struct model *model, const struct model_item *item,
                  struct model_scratch *scratch, struct worklist_entry *ret_entry)
    __attribute__((warn_unused_result));
int model_relist(struct model *model, const struct base *base, const struct worklist_entry *entry)
    __attribute__((warn_unused_result));

/* Takes out what can be scored no more. */
int model_delist(struct model *model, const struct base *base, uint64_t number)
    __attribute__((warn_unused_result));

/* The worklist's entry of an item, with tags that the model knows. Returns 0, -ENOENT, -ENOMEM or
 * -EIO. */
int model_find_entry(const struct model *model, const struct base *base, uint64_t number,
                     struct worklist_entry *ret_entry) __attribute__((warn_unused_result));

/* The same of the item with the next greater number. */
int model_entry_after(const struct model *model, const struct base *base, uint64_t number,
                      struct worklist_entry *ret_entry) __attribute__((warn_unused_result));

/* P(missing | not given) of a gap of an entry of the worklist, as of now. */
double model_gap_chance(const struct model *model, const struct worklist_entry *entry,
                        const struct worklist_gap *gap);

#define MODEL_ANY_TAG UINT32_MAX

/* An item of the worklist by what it promises: the sum of its gaps' chances. */
struct model_ranked {
    double expected;
    uint64_t number;
};

/*
 * Ranks all items of the worklist by what they promise now, gaps below `floor` left out, and all
 * but `tag` unless that is MODEL_ANY_TAG; items that promise nothing are left out. By falling
 * promise, then by rising number. The caller frees the list. Returns 0, -ENOMEM or -EIO.
 */
int model_rank_worklist(const struct model *model, const struct base *base, uint32_t tag,
                        double floor, struct model_ranked **ret_ranked, size_t *ret_count)
    __attribute__((warn_unused_result));

/* --- memory -------------------------------------------------------------------------------------
 */

/* Lets go of words and weights that are stored and were not wanted lately, until they take at most
 * so many bytes or nothing more can go. One call does not take long: it may stop before, and the
 * next one goes on. */
void model_trim(struct model *model, uint64_t dictionary_most, uint64_t weights_most);

/* About how much memory it will take to store what has changed, the store's pages included. */
uint64_t model_changed_bytes(const struct model *model);

/* --- what follows from what people have examined ------------------------------------------------
 */

const struct propensity_fit *model_fit(const struct model *model);

/*
 * The propensity of a tag as of now, tag < the number of tags: the curve's, and what was found of
 * the tag itself; and the same, or the least that the evidence allows for tags as common as this,
 * where that is more. P(belongs) is worked out with the former, P(missing) with the latter.
 */
double model_propensity(const struct model *model, uint32_t tag);
double model_tag_allowed_propensity(const struct model *model, uint32_t tag);

const struct standing *model_standing(const struct model *model);

struct model_size {
    uint64_t documents;
    uint64_t words;
    uint64_t tags;
    uint64_t postings;
    struct weights_pruned pruned;
    uint64_t dictionary_bytes;
    uint64_t weights_bytes;
    uint64_t weights_tag_bytes; /* of those, what is kept of the tags */
    uint64_t counts_bytes;
    uint64_t worklist_bytes;
    uint64_t listed; /* items of the worklist */
    uint64_t stale;  /* of those, with stale scores */
};

void model_measure(const struct model *model, struct model_size *ret_size);

/* --- for those who copy it ----------------------------------------------------------------------
 */

/* b of a tag that the model knows: s = -1 + b + w·x. */
double model_bias(const struct model *model, uint32_t tag);

/* See weights_read_chunk. */
int model_read_chunk(const struct model *model, struct base_bytes chunk,
                     struct weights_pair ret_pairs[WEIGHTS_CHUNK_PAIRS]);

#endif
