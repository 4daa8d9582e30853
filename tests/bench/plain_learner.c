/*
 * plain_learner: the same learning in the layout that comes to mind first, as a baseline: one array
 * of (tag, weight, accumulator) a word, one dense sum by tag. No cap, no rule of specificity, no
 * cut; each item pays a pass over all tags. The loss, the step and the bias are those of
 * daemon/learner/weights, so that both learn the same.
 */
#include <errno.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/grow.h"
#include "tests/bench/best.h"
#include "tests/bench/learner_kind.h"

static const float BASE_SCORE = -1.0F;
static const float FLOOR_SCORE = -0.98F;
static const float FIRST_ACCUMULATOR = 0.1F;
static const float BIAS_FEATURE = 0.5F;

enum {
    BIAS_LEAST_COUNT = 10
};

struct plain_posting {
    uint32_t tag;
    float weight;
    float accumulator;
};

struct plain_word {
    struct plain_posting *postings;
    size_t count;
    size_t capacity;
};

/* A tag that has a loss on the example. */
struct plain_active {
    uint32_t tag;
    float sign;
    float slope;
    float bias_rate;
    double factor;
    double margin;
    double curvature;
    double alpha;
    bool has_word; /* the word at hand has a posting for it */
};

/* A posting that takes part in the step. */
struct plain_hit {
    struct plain_word *word;
    size_t at;
    uint32_t active;
    float direction;
};

struct plain {
    struct plain_word *words;
    size_t word_count;
    size_t tag_count;
    float *sums; /* by tag, as are the next */
    float *biases;
    float *bias_accumulators;
    uint32_t *slots; /* 1 + place in `active`, or 0 */
    uint8_t *is_given;
    struct plain_active *active;
    size_t active_count;
    size_t active_capacity;
    struct plain_hit *hits;
    size_t hit_count;
    size_t hit_capacity;
};

static void score(struct plain *plain, const struct weights_feature *x, size_t count)
{
    memset(plain->sums, 0, plain->tag_count * sizeof *plain->sums);
    for (size_t i = 0; i < count; i++) {
        const struct plain_word *word = &plain->words[x[i].word];
        for (size_t j = 0; j < word->count; j++) {
            plain->sums[word->postings[j].tag] += word->postings[j].weight * x[i].value;
        }
    }
}

static float tag_score(const struct plain *plain, size_t tag)
{
    return BASE_SCORE + plain->biases[tag] + plain->sums[tag];
}

static float rate_of(float *accumulator, float gradient, double step)
{
    *accumulator += gradient * gradient;
    return (float)(step / sqrt((double)(FIRST_ACCUMULATOR + *accumulator)));
}

static int activate(struct plain *plain, uint32_t tag, float sign, double factor, double step)
{
    double margin = (double)(sign * tag_score(plain, tag));
    double slope = surrogate_slope(SURROGATE_SQUARED_HINGE, margin);
    if (slope == 0.0 || factor == 0.0) {
        return 0;
    }
    if (GROW(&plain->active, &plain->active_capacity, plain->active_count + 1) < 0) {
        return -ENOMEM;
    }
    struct plain_active *active = &plain->active[plain->active_count++];
    *active = (struct plain_active){
        .tag = tag, .sign = sign, .slope = (float)slope, .factor = factor, .margin = margin};
    active->bias_rate = BIAS_FEATURE * BIAS_FEATURE *
                        rate_of(&plain->bias_accumulators[tag], active->slope * BIAS_FEATURE, step);
    active->curvature = (double)active->bias_rate;
    plain->slots[tag] = (uint32_t)plain->active_count;
    return 0;
}

static int activate_all(struct plain *plain, const struct example *example)
{
    int result = 0;
    for (size_t i = 0; i < example->given_count && result == 0; i++) {
        plain->is_given[example->given[i].tag] = 1;
        result = activate(plain, example->given[i].tag, 1.0F,
                          example->given[i].factors[WEIGHTS_MAIN], example->step);
    }
    for (size_t tag = 0; tag < plain->tag_count && result == 0; tag++) {
        if (tag_score(plain, tag) > FLOOR_SCORE && !plain->is_given[tag]) {
            result = activate(plain, (uint32_t)tag, -1.0F, 1.0, example->step);
        }
    }
    return result;
}

static int add_hit(struct plain *plain, struct plain_word *word, size_t at, uint32_t slot, float x,
                   double step)
{
    if (GROW(&plain->hits, &plain->hit_capacity, plain->hit_count + 1) < 0) {
        return -ENOMEM;
    }
    struct plain_active *active = &plain->active[slot - 1];
    float rate = rate_of(&word->postings[at].accumulator, active->slope * x, step);
    active->curvature += (double)(rate * x * x);
    active->has_word = true;
    plain->hits[plain->hit_count++] = (struct plain_hit){
        .word = word, .at = at, .active = slot - 1, .direction = active->sign * rate * x};
    return 0;
}

/* The postings of one word that take part; those that the item's own tags lack are made. */
static int collect(struct plain *plain, const struct weights_feature *feature,
                   const struct example *example)
{
    struct plain_word *word = &plain->words[feature->word];
    for (size_t i = 0; i < plain->active_count; i++) {
        plain->active[i].has_word = false;
    }
    for (size_t j = 0; j < word->count; j++) {
        uint32_t slot = plain->slots[word->postings[j].tag];
        if (slot != 0 && add_hit(plain, word, j, slot, feature->value, example->step) < 0) {
            return -ENOMEM;
        }
    }
    for (size_t i = 0; i < example->given_count; i++) {
        uint32_t slot = plain->slots[example->given[i].tag];
        if (slot == 0 || plain->active[slot - 1].has_word) {
            continue;
        }
        if (GROW(&word->postings, &word->capacity, word->count + 1) < 0) {
            return -ENOMEM;
        }
        word->postings[word->count] = (struct plain_posting){.tag = example->given[i].tag};
        if (add_hit(plain, word, word->count++, slot, feature->value, example->step) < 0) {
            return -ENOMEM;
        }
    }
    return 0;
}

static void take_steps(struct plain *plain, const struct example *example)
{
    for (size_t i = 0; i < plain->active_count; i++) {
        struct plain_active *active = &plain->active[i];
        active->alpha = surrogate_step(SURROGATE_SQUARED_HINGE, active->margin, active->factor,
                                       active->curvature);
        plain->biases[active->tag] += (float)active->alpha * active->sign * active->bias_rate;
    }
    for (size_t i = 0; i < plain->hit_count; i++) {
        const struct plain_hit *hit = &plain->hits[i];
        hit->word->postings[hit->at].weight +=
            (float)plain->active[hit->active].alpha * hit->direction;
    }
    for (size_t i = 0; i < example->given_count; i++) {
        const struct weights_given *given = &example->given[i];
        if (plain->slots[given->tag] != 0 && given->tag_count < BIAS_LEAST_COUNT &&
            plain->biases[given->tag] > 0.0F) {
            plain->biases[given->tag] = 0.0F;
        }
    }
}

static void end_learning(struct plain *plain, const struct example *example)
{
    for (size_t i = 0; i < plain->active_count; i++) {
        plain->slots[plain->active[i].tag] = 0;
    }
    for (size_t i = 0; i < example->given_count; i++) {
        plain->is_given[example->given[i].tag] = 0;
    }
    plain->active_count = 0;
    plain->hit_count = 0;
}

static int learn(void *self, const struct example *example)
{
    struct plain *plain = self;
    score(plain, example->x, example->count);
    int result = activate_all(plain, example);
    for (size_t i = 0; i < example->count && result == 0; i++) {
        result = collect(plain, &example->x[i], example);
    }
    if (result == 0) {
        take_steps(plain, example);
    }
    end_learning(plain, example);
    return result;
}

static int rank(void *self, const struct weights_feature *x, size_t count, uint32_t *ret_tags,
                size_t most)
{
    struct plain *plain = self;
    struct best best = best_of(most);
    score(plain, x, count);
    for (size_t tag = 0; tag < plain->tag_count; tag++) {
        best_offer(&best, (uint32_t)tag, tag_score(plain, tag));
    }
    best_list(&best, NO_TAG, ret_tags);
    return 0;
}

static uint64_t count_postings(const void *self)
{
    const struct plain *plain = self;
    uint64_t count = 0;
    for (size_t i = 0; i < plain->word_count; i++) {
        count += plain->words[i].count;
    }
    return count;
}

static void free_learner(void *self)
{
    struct plain *plain = self;
    for (size_t i = 0; plain->words && i < plain->word_count; i++) {
        free(plain->words[i].postings);
    }
    free(plain->words);
    free(plain->sums);
    free(plain->biases);
    free(plain->bias_accumulators);
    free(plain->slots);
    free(plain->is_given);
    free(plain->active);
    free(plain->hits);
    free(plain);
}

int plain_learner_new(size_t words, size_t tags, struct learner *ret_learner)
{
    struct plain *made = calloc(1, sizeof *made);
    if (!made) {
        return -ENOMEM;
    }
    made->word_count = words;
    made->tag_count = tags;
    made->words = calloc(words, sizeof *made->words);
    made->sums = calloc(tags, sizeof *made->sums);
    made->biases = calloc(tags, sizeof *made->biases);
    made->bias_accumulators = calloc(tags, sizeof *made->bias_accumulators);
    made->slots = calloc(tags, sizeof *made->slots);
    made->is_given = calloc(tags, sizeof *made->is_given);
    if (!made->words || !made->sums || !made->biases || !made->bias_accumulators || !made->slots ||
        !made->is_given) {
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
