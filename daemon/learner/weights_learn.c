/*
 * Learning. An example is learned in three walks: which tags have a loss (the active ones), lane by
 * lane; their cells in the item's words, found or made, with the curvature D of each; then the
 * step.
 */
#include <errno.h>
#include <math.h>

#include "daemon/grow.h"
#include "daemon/learner/cell.h"
#include "daemon/learner/weights.h"
#include "daemon/learner/weights_private.h"
#include "daemon/learner/weights_scratch.h"

/*
 * The bias is a feature of this value. Measured on two corpora, one pass: against 1, tail recall@10
 * rises by .013 and .019 and PSP@5 by .002 and .006, P@1 and P@5 fall by .001 on one of them.
 */
static const float BIAS_FEATURE = 0.5F;

/*
 * The bias speaks for a tag on every item, so it stays at 0 or below until this many items have the
 * tag: one that has just been opened would be proposed everywhere until enough items had pushed it
 * down again.
 */
static const uint32_t BIAS_LEAST_COUNT = 10;

/* The logistic loss is nowhere 0: a rival is touched only while its chance by the margin, σ(s), is
 * above this. */
static const double LOGISTIC_LEAST_RIVAL = 0.05;

/* An example on its way into the weights. */
struct learning {
    struct weights *weights;
    const struct weights_example *example;
    struct weights_scratch *scratch;
};

/* --- the active tags ----------------------------------------------------------------------------
 */

static int activate(const struct learning *learning, const struct scratch_active *wanted)
{
    struct weights *weights = learning->weights;
    struct weights_scratch *scratch = learning->scratch;
    struct scratch_active active = *wanted;
    active.margin =
        (double)(active.sign * weights_tag_score(weights, scratch, active.lane, active.tag));
    double slope = surrogate_slope(weights->settings.surrogate, active.margin);
    if (slope == 0.0 || active.factor == 0.0) {
        return 0;
    }
    if (GROW(&scratch->active, &scratch->active_capacity, scratch->active_count + 1) < 0 ||
        marks_add(&weights->changed_tags, active.tag) < 0) {
        return -ENOMEM;
    }
    struct weights_bias *bias = &weights->tags[active.tag].biases[active.lane];
    float gradient = (float)slope * BIAS_FEATURE;
    bias->accumulator += gradient * gradient;
    float rate = (float)(learning->example->step /
                         sqrt((double)(CELL_FIRST_ACCUMULATOR + bias->accumulator)));
    active.slope = (float)slope;
    active.bias_rate = BIAS_FEATURE * BIAS_FEATURE * rate;
    active.curvature = (double)active.bias_rate;
    scratch->active[scratch->active_count++] = active;
    scratch->slot[active.tag * scratch->lanes + active.lane] = (uint32_t)scratch->active_count;
    scratch->marks[active.tag] |= SCRATCH_ACTIVE;
    return 0;
}

static int activate_rival(const struct learning *learning, enum weights_lane lane, uint32_t tag,
                          float score)
{
    bool is_rival = score > WEIGHTS_FLOOR_SCORE;
    if (learning->weights->settings.surrogate == SURROGATE_LOGISTIC) {
        is_rival = 1.0 / (1.0 + exp(-(double)score)) > LOGISTIC_LEAST_RIVAL;
    }
    const struct scratch_active wanted = {.tag = tag, .lane = lane, .sign = -1.0F, .factor = 1.0};
    return is_rival ? activate(learning, &wanted) : 0;
}

/* The logistic loss has rivals below the floor, too. */
static int activate_touched(const struct learning *learning, enum weights_lane lane)
{
    const struct weights_scratch *scratch = learning->scratch;
    for (size_t i = 0; i < scratch->touched_count; i++) {
        uint32_t tag = scratch->touched[i];
        float score = weights_tag_score(learning->weights, scratch, lane, tag);
        if (!(scratch->marks[tag] & SCRATCH_GIVEN) &&
            activate_rival(learning, lane, tag, score) < 0) {
            return -ENOMEM;
        }
    }
    return 0;
}

static int activate_rivals(const struct learning *learning, enum weights_lane lane)
{
    if (learning->weights->settings.surrogate == SURROGATE_LOGISTIC) {
        return activate_touched(learning, lane);
    }
    size_t count = 0;
    const struct weights_rival *rivals = weights_rivals(learning->scratch, lane, &count);
    for (size_t i = 0; i < count; i++) {
        if (!(learning->scratch->marks[rivals[i].tag] & SCRATCH_GIVEN) &&
            activate_rival(learning, lane, rivals[i].tag, rivals[i].score) < 0) {
            return -ENOMEM;
        }
    }
    return 0;
}

static int activate_denied(const struct learning *learning, enum weights_lane lane)
{
    const struct weights_example *example = learning->example;
    for (size_t i = 0; i < example->denied_count; i++) {
        uint32_t tag = example->denied[i];
        float score = weights_tag_score(learning->weights, learning->scratch, lane, tag);
        if (activate_rival(learning, lane, tag, score) < 0) {
            return -ENOMEM;
        }
    }
    return 0;
}

static int note_count(struct weights *weights, const struct weights_given *given)
{
    struct tag_entry *entry = &weights->tags[given->tag];
    if (entry->count == given->tag_count) {
        return 0;
    }
    entry->count = given->tag_count;
    return marks_add(&weights->changed_tags, given->tag);
}

static int activate_lane(const struct learning *learning, enum weights_lane lane)
{
    const struct weights_example *example = learning->example;
    for (size_t i = 0; i < example->given_count; i++) {
        const struct weights_given *given = &example->given[i];
        const struct scratch_active wanted = {.tag = given->tag,
                                              .tag_count = given->tag_count,
                                              .lane = lane,
                                              .sign = 1.0F,
                                              .factor = given->factors[lane]};
        learning->scratch->marks[given->tag] |= SCRATCH_GIVEN;
        if (note_count(learning->weights, given) < 0) {
            return -ENOMEM;
        }
        if (activate(learning, &wanted) < 0) {
            return -ENOMEM;
        }
    }
    return example->pairs_alone ? activate_denied(learning, lane) : activate_rivals(learning, lane);
}

/* --- their cells --------------------------------------------------------------------------------
 */

/* Notes that a cell takes part, raises its accumulator, and adds to its tag's curvature. */
static int add_hit(const struct learning *learning, const struct weights_feature *feature,
                   uint32_t place, uint32_t at, uint32_t slot)
{
    struct weights_scratch *scratch = learning->scratch;
    struct postings *postings = learning->weights->postings;
    if (GROW(&scratch->hits, &scratch->hit_capacity, scratch->hit_count + 1) < 0 ||
        postings_touch(postings, place) < 0) {
        return -ENOMEM;
    }
    struct scratch_active *active = &scratch->active[slot];
    uint32_t *cell = &postings_at(postings, place)->numbers[at];
    uint64_t noise = cell_noise(learning->example->number * WEIGHTS_LANES + active->lane,
                                feature->word, active->tag);
    float gradient = active->slope * feature->value;
    float before = *cell != 0 ? cell_accumulator(*cell) : CELL_FIRST_ACCUMULATOR;
    float accumulator = before + gradient * gradient;
    float rate = (float)learning->example->step / sqrtf(accumulator);
    *cell = cell_of(cell_weight(*cell), cell_code_accumulator(accumulator, noise));
    active->curvature += (double)(rate * feature->value * feature->value);
    active->last_word = feature->word;
    active->has_word = true;
    scratch->hits[scratch->hit_count++] =
        (struct scratch_hit){.place = place,
                             .at = at,
                             .slot = slot,
                             .direction = active->sign * rate * feature->value,
                             .noise = noise};
    return 0;
}

/* Whether the word may speak for a tag that has no weight for it yet: one that the item has, and
 * for which the word is specific enough. */
static bool may_create(const struct weights *weights, const struct weights_feature *feature,
                       const struct scratch_active *active)
{
    double specificity = weights->settings.specificity;
    return active->sign > 0.0F &&
           (specificity == 0.0 ||
            (double)feature->document_count <= specificity * (double)active->tag_count);
}

/* The cells of one posting. */
static int collect_posting(const struct learning *learning, const struct weights_feature *feature,
                           uint32_t place, uint32_t at, uint32_t tag)
{
    const struct weights_scratch *scratch = learning->scratch;
    for (size_t lane = 0; lane < scratch->lanes; lane++) {
        uint32_t slot = scratch->slot[tag * scratch->lanes + lane];
        if (slot == 0) {
            continue;
        }
        uint32_t cell_at = at + 1 + (uint32_t)lane;
        uint32_t cell = postings_at(learning->weights->postings, place)->numbers[cell_at];
        if (cell == 0 && !may_create(learning->weights, feature, &scratch->active[slot - 1])) {
            continue;
        }
        if (add_hit(learning, feature, place, cell_at, slot - 1) < 0) {
            return -ENOMEM;
        }
        learning->scratch->created += cell == 0 && lane == WEIGHTS_MAIN;
    }
    return 0;
}

static int collect_chunk(const struct learning *learning, const struct weights_feature *feature,
                         uint32_t place)
{
    const struct postings *postings = learning->weights->postings;
    const struct weights_scratch *scratch = learning->scratch;
    const struct chunk *chunk = postings_at(postings, place);
    size_t stride = postings_stride(postings);
    const uint32_t *numbers = chunk->numbers;
    const uint8_t *marks = scratch->marks;
    size_t count = chunk->count;
    size_t fetching = weights_fetching(count);
    for (size_t j = 0; j < count; j++) {
        uint32_t tag = numbers[j * stride];
        if (j < fetching) {
            __builtin_prefetch(marks + numbers[(j + WEIGHTS_AHEAD) * stride]);
        }
        if ((marks[tag] & SCRATCH_ACTIVE) != 0 &&
            collect_posting(learning, feature, place, (uint32_t)(j * stride), tag) < 0) {
            return -ENOMEM;
        }
    }
    return 0;
}

/* A new posting for one of the item's own tags, with the cells of all lanes that want one. */
static int create_posting(const struct learning *learning, const struct weights_feature *feature,
                          uint32_t tag)
{
    struct weights *weights = learning->weights;
    uint32_t place = 0;
    uint32_t at = 0;
    if (postings_append(weights->postings, feature->word, tag, &place, &at) < 0) {
        return -ENOMEM;
    }
    weights->posting_count++;
    return collect_posting(learning, feature, place,
                           at * (uint32_t)postings_stride(weights->postings), tag);
}

/* Whether an active tag still lacks a weight for the word that it may have. */
static bool is_missing(const struct learning *learning, const struct weights_feature *feature,
                       uint32_t slot)
{
    if (slot == 0) {
        return false;
    }
    const struct scratch_active *active = &learning->scratch->active[slot - 1];
    return !(active->has_word && active->last_word == feature->word) &&
           may_create(learning->weights, feature, active);
}

/* Makes the weights that the item's own tags still lack for one word. */
static int create_missing(const struct learning *learning, const struct weights_feature *feature)
{
    const struct weights_scratch *scratch = learning->scratch;
    for (size_t i = 0; i < learning->example->given_count; i++) {
        uint32_t tag = learning->example->given[i].tag;
        const uint32_t *slots = &scratch->slot[tag * scratch->lanes];
        bool missing = is_missing(learning, feature, slots[WEIGHTS_MAIN]) ||
                       (scratch->lanes == WEIGHTS_LANES &&
                        is_missing(learning, feature, slots[WEIGHTS_SHADOW]));
        if (missing && create_posting(learning, feature, tag) < 0) {
            return -ENOMEM;
        }
    }
    return 0;
}

/* Notes that a word's postings are to be put in order, once the step is taken. */
static int note_due(struct weights_scratch *scratch, const struct weights_feature *feature)
{
    if (GROW(&scratch->due, &scratch->due_capacity, scratch->due_count + 1) < 0) {
        return -ENOMEM;
    }
    scratch->due[scratch->due_count++] = *feature;
    return 0;
}

static int collect_hits(const struct learning *learning, const struct weights_feature *feature)
{
    const struct postings *postings = learning->weights->postings;
    learning->scratch->created = 0;
    const uint32_t *places = NULL;
    uint32_t chunks = postings_chunks(postings, feature->word, &places);
    for (uint32_t number = 0; number < chunks; number++) {
        if (collect_chunk(learning, feature, places[number] - 1) < 0) {
            return -ENOMEM;
        }
    }
    if (create_missing(learning, feature) < 0) {
        return -ENOMEM;
    }
    return weights_compaction_due(learning->weights, feature->word, learning->scratch->created)
               ? note_due(learning->scratch, feature)
               : 0;
}

/* --- the step -----------------------------------------------------------------------------------
 */

static void take_steps(const struct learning *learning)
{
    struct weights *weights = learning->weights;
    const struct weights_scratch *scratch = learning->scratch;
    for (size_t i = 0; i < scratch->active_count; i++) {
        struct scratch_active *active = &scratch->active[i];
        active->alpha = surrogate_step(weights->settings.surrogate, active->margin, active->factor,
                                       active->curvature);
        weights->tags[active->tag].biases[active->lane].value +=
            (float)active->alpha * active->sign * active->bias_rate;
        weights_refresh_raised(weights, active->tag);
    }
    for (size_t i = 0; i < scratch->hit_count; i++) {
        const struct scratch_hit *hit = &scratch->hits[i];
        uint32_t *cell = &postings_at(weights->postings, hit->place)->numbers[hit->at];
        float change = (float)scratch->active[hit->slot].alpha * hit->direction;
        *cell = cell_of(cell_move_weight(cell_weight(*cell), change, hit->noise),
                        cell_accumulator_code(*cell));
    }
}

/* Of the tags that have learned alone: they are marked as changed, and what is right already stays
 * as it is. */
static void hold_young_biases(const struct learning *learning)
{
    const struct weights_scratch *scratch = learning->scratch;
    for (size_t i = 0; i < scratch->active_count; i++) {
        const struct scratch_active *active = &scratch->active[i];
        struct weights_bias *bias = &learning->weights->tags[active->tag].biases[active->lane];
        if (active->sign > 0.0F && active->tag_count < BIAS_LEAST_COUNT && bias->value > 0.0F) {
            bias->value = 0.0F;
            weights_refresh_raised(learning->weights, active->tag);
        }
    }
}

/* A step of α along y·rate·x adds α·D·y to the score. */
static void tell_moves(const struct learning *learning)
{
    const struct weights_example *example = learning->example;
    const struct weights_scratch *scratch = learning->scratch;
    for (size_t i = 0; i < example->watched_count; i++) {
        uint32_t slot = scratch->slot[example->watched[i] * scratch->lanes + WEIGHTS_MAIN];
        const struct scratch_active *active = slot > 0 ? &scratch->active[slot - 1] : NULL;
        example->moves[i] =
            active ? (float)(active->alpha * active->curvature) * active->sign : 0.0F;
    }
}

int weights_learn(struct weights *weights, const struct weights_example *example,
                  struct weights_scratch *scratch)
{
    const struct learning learning = {.weights = weights, .example = example, .scratch = scratch};
    int result = scratch_reserve_slots(scratch);
    if (result < 0) {
        return result;
    }
    for (size_t lane = 0; lane < example->lanes && result == 0; lane++) {
        result = activate_lane(&learning, (enum weights_lane)lane);
    }
    for (size_t i = 0; i < example->count && result == 0 && scratch->active_count > 0; i++) {
        result = collect_hits(&learning, &example->x[i]);
    }
    if (result == 0) {
        take_steps(&learning);
        hold_young_biases(&learning);
        tell_moves(&learning);
    }
    for (size_t i = 0; i < scratch->due_count && result == 0; i++) {
        result = weights_compact(weights, &scratch->due[i]);
    }
    scratch_end_learning(scratch, example->given, example->given_count);
    return result;
}
