/*
 * model_parts: the model taken apart for those who store it. What has changed since the last
 * model_clean comes out part by part; what was stored goes back in the same parts.
 *
 * Storing: forgotten words first, then everything else in any order, then model_clean once it is
 * durable. Restoring: into a new model, words before chunks, model_restored at the end.
 */
#ifndef UNDERTAG_MODEL_PARTS_H
#define UNDERTAG_MODEL_PARTS_H

#include <stddef.h>
#include <stdint.h>

#include "daemon/learner/model.h"

/* The counts that are no word's and no tag's. */
struct model_totals {
    uint64_t documents;
    uint64_t factor_count; /* given pairs behind the normaliser */
    double factor_sum;     /* their factors */
    double calibration_gain;
};

struct model_word {
    const char *term; /* not ended by NUL */
    size_t term_bytes;
    uint32_t number;
    uint32_t count;
};

struct model_tag {
    uint32_t number;
    uint32_t count;      /* items that have it */
    uint32_t unprompted; /* those to which it was given unprompted: N_l */
    float bias;
    float bias_accumulator;
};

/* Takes each part; anything but 0 ends the walk and is returned. */
struct model_sink {
    void *user;
    int (*forgotten)(void *user, const struct model_word *word); /* count is 0 */
    int (*word)(void *user, const struct model_word *word);
    int (*chunk)(void *user, const struct weights_chunk *chunk);
    int (*tag)(void *user, const struct model_tag *tag);
    int (*bin)(void *user, uint32_t number, const struct calibration_bin *bin);
    int (*totals)(void *user, const struct model_totals *totals);
};

int model_changes(const struct model *model, const struct model_sink *sink)
    __attribute__((warn_unused_result));

void model_clean(struct model *model);

/* Each returns 0, -ENOMEM, or -EINVAL for what cannot belong to one model. */
int model_restore_word(struct model *model, const struct model_word *word)
    __attribute__((warn_unused_result));
int model_restore_chunk(struct model *model, const struct weights_chunk *chunk)
    __attribute__((warn_unused_result));
int model_restore_tag(struct model *model, const struct model_tag *tag)
    __attribute__((warn_unused_result));
int model_restore_bin(struct model *model, uint32_t number, const struct calibration_bin *bin)
    __attribute__((warn_unused_result));
int model_restore_totals(struct model *model, const struct model_totals *totals)
    __attribute__((warn_unused_result));
int model_restored(struct model *model) __attribute__((warn_unused_result));

#endif
