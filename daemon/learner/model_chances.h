/*
 * model_chances: what turns a model's scores into chances, as of now, for those who work chances
 * out elsewhere with the same numbers. All of it is valid until the model learns on.
 *
 * A draft without tags: P(belongs) of a tag with the propensity p (model_propensity) and the score
 * s is calibrators_chance(curves, p, s); where no word of the draft has a weight for any tag it is
 * min(N_l/N/p, 1), N_l the tag's unprompted count.
 *
 * A draft with tags, or a filed item: let q be that chance and p' the propensity that the evidence
 * allows (model_tag_allowed_propensity). Then m = propensity_missing_chance(p', q). The item's
 * promise is the sum of m over its candidates (candidates.h, by bands of the tags' counts) that it
 * lacks, with q of AGREEMENT_LEAST or more. With o, the promise without the tag itself, the chance
 * is m below MODEL_AGREED_FROM, agreement_chance(agreement, o, m) from twice that on, and in
 * between it moves from one to the other with m.
 */
#ifndef UNDERTAG_MODEL_CHANCES_H
#define UNDERTAG_MODEL_CHANCES_H

#include "daemon/learner/agreement.h"
#include "daemon/learner/calibrators.h"
#include "daemon/learner/model.h"

/* Below this chance a gap is not looked at twice: there are thousands of them. */
#define MODEL_AGREED_FROM 0.02

const struct calibrators_curves *model_curves(const struct model *model);
const struct agreement *model_agreement(const struct model *model);

/* The least propensity that the evidence allows tags of a class (calibrators_class); 0: any. */
double model_least_of_class(const struct model *model, size_t tag_class);

#endif
