/*
 * model_parts: the model taken apart for those who store it. What has changed and is not stored
 * comes out part by part; what was stored goes back in the same parts.
 *
 * Storing: in the order in which model_changes gives them, then model_clean once it is durable:
 * from then on words, chunks and entries are read from the base. Or beside learning: model_changes,
 * whose parts are copied, and model_seal before anything else is learned; what changes from here on
 * is told apart from what is sealed, which stays in memory until it is durable and model_stored
 * says so. What does not arrive comes out once more with the next model_changes. Restoring: into a
 * new model, what is held in memory (tags, figures, totals), in any order; model_restored at the
 * end.
 */
#ifndef UNDERTAG_MODEL_PARTS_H
#define UNDERTAG_MODEL_PARTS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "daemon/learner/model.h"
#include "daemon/text/dictionary.h"

/* The counts that are no word's and no tag's. */
struct model_totals {
    uint64_t documents;
    uint64_t factor_count; /* given pairs behind the normaliser */
    double factor_sum;     /* their factors */
    uint64_t latest;       /* the greatest number of an item */
    uint64_t evidence_items;
    uint64_t curves_items;
    uint64_t fit_halves;
    double evidence_gain;
    struct dictionary_totals words;
    uint64_t postings;
    struct weights_pruned pruned;
    struct model_rehearsal rehearsal;
    uint64_t examples;
};

struct model_tag {
    uint32_t number;
    uint32_t count;      /* items that have it */
    uint32_t unprompted; /* those to which it was given unprompted: N_l */
    uint32_t trial_halves;
    uint32_t given_halves;
    struct weights_bias bias;
    struct weights_bias shadow_bias; /* zeros without a shadow */
    uint32_t given_count;            /* items that had it when it was given last */
};

/* What is kept as plain lists of numbers. */
enum model_figures_kind {
    MODEL_FIGURES_BIN,       /* the calibrators' evidence, by bin */
    MODEL_FIGURES_CURVE,     /* the calibrators, by group */
    MODEL_FIGURES_LEAST,     /* the least propensities that the evidence allows, number 0 */
    MODEL_FIGURES_AGREEMENT, /* by row, then the gain */
    MODEL_FIGURES_FIT,       /* the propensities' fit, number 0 */
    MODEL_FIGURES_STANDING,  /* the standing, by its parts */
    MODEL_FIGURES_WORKLIST,  /* the worklist's counts, by their parts */
    MODEL_FIGURES_KINDS
};

struct model_figures {
    enum model_figures_kind kind;
    uint32_t number;
    size_t count;
    const double *values;
};

/* Takes each part; anything but 0 ends the walk and is returned. */
struct model_sink {
    void *user;
    int (*forgotten)(void *user, const struct dictionary_word *word); /* before all others */
    int (*word)(void *user, const struct dictionary_word *word);
    int (*cut_chunk)(void *user, const struct weights_chunk *chunk); /* is no more */
    int (*chunk)(void *user, const struct weights_chunk *chunk);
    int (*tag)(void *user, const struct model_tag *tag);
    int (*figures)(void *user, const struct model_figures *figures);
    int (*delisted)(void *user, uint64_t number); /* gone from the worklist */
    int (*listed)(void *user, const struct worklist_entry *entry);
    int (*totals)(void *user, const struct model_totals *totals);
};

int model_changes(const struct model *model, const struct model_sink *sink)
    __attribute__((warn_unused_result));

/* Returns 0, or -ENOMEM with everything still to be stored. Then the words are sealed, by steps of
 * a bounded size, until model_seal_words says that there are no more; nothing may be learned in
 * between, while whoever asks may come. */
int model_seal(struct model *model) __attribute__((warn_unused_result));
bool model_seal_words(struct model *model);

/* Likewise by steps: says whether there are more to be taken. */
bool model_stored(struct model *model);

/* Everything is stored, sealed or not. */
void model_clean(struct model *model);

/* Each returns 0, -ENOMEM, or -EINVAL for what cannot belong to one model. */
int model_restore_tag(struct model *model, const struct model_tag *tag)
    __attribute__((warn_unused_result));
int model_restore_figures(struct model *model, const struct model_figures *figures)
    __attribute__((warn_unused_result));
int model_restore_totals(struct model *model, const struct model_totals *totals)
    __attribute__((warn_unused_result));
int model_restored(struct model *model) __attribute__((warn_unused_result));

#endif
