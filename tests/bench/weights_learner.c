/*
 * weights_learner: undertag's own learner as one of those under comparison. All that the
 * comparisons know of daemon/learner is here.
 */
#include <errno.h>
#include <stdlib.h>

#include "daemon/options.h"
#include "tests/bench/best.h"
#include "tests/bench/learner_kind.h"

struct weights_learner {
    struct weights *weights;
    struct weights_scratch *scratch;
};

/* One lane, and nothing stored: all postings are in memory. */
enum {
    LANES = 1
};
static const struct base *const NO_BASE = NULL;

static int learn(void *self, const struct example *example)
{
    struct weights_learner *learner = self;
    const struct weights_example taught = {.number = example->number,
                                           .x = example->x,
                                           .count = example->count,
                                           .lanes = LANES,
                                           .given = example->given,
                                           .given_count = example->given_count,
                                           .step = example->step};
    const struct weights_shrinkage shrinkage = {.number = example->number,
                                                .x = example->x,
                                                .count = example->count,
                                                .step = example->step,
                                                .cost = example->cost};
    if (weights_admit(learner->weights, NO_BASE, example->x, example->count) < 0 ||
        (example->cost > 0.0 && weights_shrink(learner->weights, &shrinkage) < 0) ||
        weights_score(learner->weights, NO_BASE, example->x, example->count, LANES,
                      learner->scratch) < 0) {
        return -ENOMEM;
    }
    return weights_learn(learner->weights, &taught, learner->scratch);
}

static int rank(void *self, const struct weights_feature *x, size_t count, uint32_t *ret_tags,
                size_t most)
{
    struct weights_learner *learner = self;
    struct best best = best_of(most);
    size_t rival_count = 0;
    if (weights_score(learner->weights, NO_BASE, x, count, LANES, learner->scratch) < 0) {
        return -ENOMEM;
    }
    const struct weights_rival *rivals =
        weights_rivals(learner->scratch, WEIGHTS_MAIN, &rival_count);
    for (size_t i = 0; i < rival_count; i++) {
        best_offer(&best, rivals[i].tag, rivals[i].score);
    }
    best_list(&best, NO_TAG, ret_tags);
    return 0;
}

static uint64_t count_postings(const void *self)
{
    return weights_postings(((const struct weights_learner *)self)->weights);
}

static void free_learner(void *self)
{
    struct weights_learner *learner = self;
    weights_free(learner->weights);
    weights_scratch_free(learner->scratch);
    free(learner);
}

int weights_learner_new(size_t tags, double specificity, struct learner *ret_learner)
{
    struct options options;
    options_defaults(&options);
    struct weights_settings settings = options_model_settings(&options).weights;
    settings.shadow = false;
    if (specificity >= 0.0) {
        settings.specificity = specificity;
    }
    struct weights_learner *made = calloc(1, sizeof *made);
    if (!made) {
        return -ENOMEM;
    }
    if (weights_new(&settings, &made->weights) < 0 || weights_scratch_new(&made->scratch) < 0 ||
        weights_reserve_tags(made->weights, tags) < 0) {
        free_learner(made);
        return -ENOMEM;
    }
    *ret_learner = (struct learner){.self = made,
                                    .learn = learn,
                                    .rank = rank,
                                    .postings = count_postings,
                                    .free = free_learner};
    return 0;
}

int weights_learner_count(struct learner *learner, uint32_t *ret_postings, size_t words)
{
    struct weights *weights = ((struct weights_learner *)learner->self)->weights;
    for (size_t word = 0; word < words; word++) {
        uint64_t before = weights_postings(weights);
        if (weights_forget_word(weights, NO_BASE, (uint32_t)word) < 0) {
            return -ENOMEM;
        }
        ret_postings[word] = (uint32_t)(before - weights_postings(weights));
    }
    return 0;
}
