/*
 * completeness: which share of the pairs that belong to a tag, or to many, is on record, with 90 %
 * intervals. Pure functions of numbers; any thread.
 *
 * Of the items not fully checked, U pairs were given unprompted. Given p, the hidden ones are
 * negative binomial (U - α successes, p) with the mean (U - α)(1 - p)/p, α the fit's `rarity`; a
 * fit with α = 0 gives the plain U/p - U, which counts the pairs of tags nobody has used yet too.
 * Those since found are no longer missing. share = count/(count + missing).
 */
#ifndef UNDERTAG_COMPLETENESS_H
#define UNDERTAG_COMPLETENESS_H

#include "daemon/learner/propensity_fit.h"

struct completeness_tag {
    double count;           /* items that have the tag on record now */
    double unprompted_open; /* U: given unprompted, on items not fully checked */
    double found;           /* ruled to belong after filing, on items not fully checked */
    double tag_count;       /* N_l as the curve takes it (effective, for a tag opened late) */
    double trials;          /* the tag's own trials in fully checked items */
    double given;           /* of these, given before the check */
};

struct completeness {
    double share; /* in (0, 1]; 1 for a tag with nothing on record and nothing missing */
    double low;   /* the 90 % interval of the share as it really is (not of its expectation) */
    double high;
    double given;   /* pairs on record: `count`, or its sum */
    double missing; /* expected: max(0, (U - α)(1 - p)/p - found), U at least α */
    enum propensity_from from;
};

/* One tag. */
struct completeness completeness_of_tag(const struct propensity_fit *fit,
                                        const struct completeness_tag *tag, double documents);

/* The point estimate alone, cheap: missing pairs of one tag; share = count/(count + missing). */
double completeness_missing_at(const struct propensity_fit *fit, const struct completeness_tag *tag,
                               double growth);

/* A sum over tags: zero it, or completeness_sum_init, then add; some 50 ns a tag. */
struct completeness_sum {
    double count;
    double missing;
    double variance;                   /* of the parts that are each tag's own */
    double gradient[PROPENSITY_KNOTS]; /* d missing / d logit of the curve at the knots: shared */
    double rarity_slope;               /* d missing / dα: shared */
    double trials;
};

void completeness_sum_init(struct completeness_sum *sum);
void completeness_sum_add(struct completeness_sum *sum, const struct propensity_fit *fit,
                          const struct completeness_tag *tag, double growth);
/* Adds `part`, made with the same fit. */
void completeness_sum_merge(struct completeness_sum *sum, const struct completeness_sum *part);

/*
 * The total share: the curve's uncertainty is shared by its tags (delta method with the fit's
 * covariance), the rest independent. `from` is the curve without any evidence, else both.
 */
struct completeness completeness_of_sum(const struct completeness_sum *sum,
                                        const struct propensity_fit *fit);

#endif
