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

static int learn(void *self, const struct example *example)
{
    struct weights_learner *learner = self;
    const struct weights_example taught = {.x = example->x,
                                           .count = example->count,
                                           .given = example->given,
                                           .given_count = example->given_count,
                                           .step = example->step};
    if (weights_score(learner->weights, example->x, example->count, learner->scratch) < 0) {
        return -ENOMEM;
    }
    return weights_learn(learner->weights, &taught, learner->scratch);
}

static int rank(void *self, const struct weights_feature *x, size_t count, uint32_t *ret_tags,
                size_t most)
{
    struct weights_learner *learner = self;
    struct best best = {.most = most};
    size_t touched_count = 0;
    if (weights_score(learner->weights, x, count, learner->scratch) < 0) {
        return -ENOMEM;
    }
    const uint32_t *touched = weights_touched(learner->scratch, &touched_count);
    for (size_t i = 0; i < touched_count; i++) {
        best_offer(&best, touched[i],
                   weights_tag_score(learner->weights, learner->scratch, touched[i]));
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

void weights_learner_count(struct learner *learner, uint32_t *ret_postings, size_t words)
{
    struct weights *weights = ((struct weights_learner *)learner->self)->weights;
    for (size_t word = 0; word < words; word++) {
        uint64_t before = weights_postings(weights);
        weights_forget_word(weights, (uint32_t)word);
        ret_postings[word] = (uint32_t)(before - weights_postings(weights));
    }
}
