/*
 * outlook: what is to be expected of a tag: its propensity by the curve and by what was found of
 * the tag itself, and how many items lack it.
 */
#ifndef UNDERTAG_OUTLOOK_H
#define UNDERTAG_OUTLOOK_H

#include "daemon/engine.h"
#include "daemon/learner/completeness.h"
#include "storage/vocabulary.h"

/* The desk as of now, for any number of tags. */
struct outlook {
    struct propensity_fit fit;
    double documents;
    double growth; /* propensity_growth of them */
    uint64_t learned;
};

/* Returns 0 or -ENOMEM; `items` is what the store has now. */
int outlook_begin(struct engine *engine, uint64_t items, struct outlook *ret_outlook)
    __attribute__((warn_unused_result));

/* The same by a model that has learned up to `learned`. */
void outlook_of_model(const struct model *model, uint64_t items, uint64_t learned,
                      struct outlook *ret_outlook);

/* What completeness.h takes of a tag. A second tagging counts as half a trial. */
struct completeness_tag outlook_of_tag(const struct vocabulary_counts *counts);

/* The propensity with its interval; slower than the mean alone. */
struct propensity_of_tag outlook_propensity(const struct outlook *outlook,
                                            const struct vocabulary_counts *counts);
double outlook_propensity_mean(const struct outlook *outlook,
                               const struct vocabulary_counts *counts);

/* The expected number of items that lack it. */
double outlook_missing(const struct outlook *outlook, const struct vocabulary_counts *counts);

/* "curve", "checks", "both". */
const char *outlook_from(enum propensity_from from);

#endif
