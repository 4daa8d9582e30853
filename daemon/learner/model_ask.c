#include <errno.h>
#include <math.h>

#include "daemon/grow.h"
#include "daemon/learner/best_gaps.h"
#include "daemon/learner/model.h"
#include "daemon/learner/model_private.h"

/* Chances as whole numbers of 2^-40: a million tags of chance 1 still fit. */
static const double CHANCE_UNIT = 1099511627776.0;

static chance_sum to_sum(double chance)
{
    return (chance_sum)llrint(chance * CHANCE_UNIT);
}

/* How a question turns scores into chances. */
struct asker {
    const struct model *model;
    const struct model_question *question;
    struct model_scratch *scratch;
    bool by_prevalence; /* the item holds no word that any tag has a weight for */
    double promise;     /* of a tagged item; see agreement.h */
};

/* --- the chance of one tag ----------------------------------------------------------------------
 */

/* How often the tag truly belongs, whatever the item: its observed share over its propensity. */
static double prevalence(const struct model *model, uint32_t tag, double propensity)
{
    if (model->documents == 0) {
        return 0.0;
    }
    double share = (double)model->tags[tag].unprompted / (double)model->documents;
    return fmin(share / propensity, 1.0);
}

static double tag_chance(const struct asker *asker, uint32_t tag, double score)
{
    double propensity = model_propensity(asker->model, tag);
    double belongs = asker->by_prevalence
                         ? prevalence(asker->model, tag, propensity)
                         : calibrators_chance(&asker->model->curves, propensity, score);
    return asker->question->tagged
               ? model_missing_of_belongs(asker->model, tag, propensity, belongs, asker->promise)
               : belongs;
}

/* What follows from the model as it is now, kept in the scratch until the model moves on. */
static void refresh_rest(const struct model *model, struct model_scratch *scratch)
{
    if (scratch->version == model->version) {
        return;
    }
    scratch->most_of_rest = 0.0;
    for (size_t b = 0; b < CENSUS_BINS; b++) {
        size_t class = calibrators_class((uint32_t)census_middle(b), model->documents);
        double propensity = propensity_fit_mean_at(&model->fit, census_middle(b), model->growth);
        double belongs = calibrators_chance(&model->curves, propensity, CALIBRATORS_FLOOR_SCORE);
        scratch->rest_belongs[b] = to_sum(belongs);
        scratch->rest_missing[b] =
            to_sum(propensity_missing_chance(fmax(propensity, model->least[class]), belongs));
        scratch->most_of_rest = fmax(scratch->most_of_rest, belongs);
    }
    scratch->version = model->version;
}

/* --- the sum over all tags ----------------------------------------------------------------------
 */

static const chance_sum *rest_of_bins(const struct asker *asker)
{
    return asker->question->tagged ? asker->scratch->rest_missing : asker->scratch->rest_belongs;
}

/* What a tag at the floor adds to the expected number. */
static chance_sum rest_chance(const struct asker *asker, uint32_t tag)
{
    return model_is_unused(asker->model, tag)
               ? 0
               : rest_of_bins(asker)[census_bin(asker->model->tags[tag].unprompted)];
}

/* The expected number if every tag that nobody has checked were at the floor. */
static chance_sum rest_of_all(const struct asker *asker)
{
    const struct model *model = asker->model;
    const chance_sum *rest = rest_of_bins(asker);
    chance_sum sum = 0;
    if (asker->question->checked_below > 0) {
        for (uint32_t tag = asker->question->checked_below; tag < model->tag_count; tag++) {
            sum += rest_chance(asker, tag);
        }
        return sum;
    }
    for (size_t b = 0; b < CENSUS_BINS; b++) {
        sum += rest[b] * model->census[b];
    }
    return sum - rest[0] * model->unused_tags; /* given 0 times: bin 0 */
}

static bool is_open(const struct asker *asker, uint32_t tag)
{
    return !asker->scratch->barred[tag] && !model_is_unused(asker->model, tag) &&
           tag >= asker->question->checked_below;
}

/* Marks what may not be proposed; returns what those tags would add at the floor. */
static chance_sum bar_tags(const struct asker *asker, const uint32_t *tags, size_t count,
                           enum model_mark mark)
{
    chance_sum sum = 0;
    for (size_t i = 0; i < count; i++) {
        if (tags[i] < asker->model->tag_count && !asker->scratch->barred[tags[i]]) {
            sum += is_open(asker, tags[i]) ? rest_chance(asker, tags[i]) : 0;
            asker->scratch->barred[tags[i]] = (uint8_t)mark;
        }
    }
    return sum;
}

static void unbar_tags(const struct asker *asker, const uint32_t *tags, size_t count)
{
    for (size_t i = 0; i < count; i++) {
        if (tags[i] < asker->model->tag_count) {
            asker->scratch->barred[tags[i]] = 0;
        }
    }
}

/* --- candidates ---------------------------------------------------------------------------------
 */

/* However many tags may be proposed, only as many are kept as are asked for. */
static int add_candidate(const struct asker *asker, uint32_t tag, double score, double chance,
                         size_t *count)
{
    struct model_scratch *scratch = asker->scratch;
    size_t most = asker->question->most;
    const struct model_gap gap = {.tag = tag, .chance = chance, .score = score};
    if (*count < most && GROW(&scratch->gaps, &scratch->gap_capacity, *count + 1) < 0) {
        return -ENOMEM;
    }
    best_gaps_put(scratch->gaps, count, most, &gap);
    return 0;
}

/* The tags above the floor, and the expected number over all. */
static int gather_rivals(const struct asker *asker, const struct weights_rival *rivals,
                         size_t count, size_t *ret_count, chance_sum *expected)
{
    for (size_t i = 0; i < count; i++) {
        uint32_t tag = rivals[i].tag;
        double score = (double)rivals[i].score;
        double honest = score - (double)asker->scratch->own[tag];
        if (!is_open(asker, tag) || honest <= CALIBRATORS_FLOOR_SCORE) {
            continue;
        }
        double chance = tag_chance(asker, tag, honest);
        *expected += to_sum(chance) - rest_chance(asker, tag);
        if (chance >= asker->question->floor &&
            add_candidate(asker, tag, score, chance, ret_count) < 0) {
            return -ENOMEM;
        }
    }
    return 0;
}

static int gather_touched(const struct asker *asker, chance_sum barred_rest, size_t *ret_count,
                          chance_sum *ret_expected)
{
    const struct model_scratch *scratch = asker->scratch;
    size_t count = 0;
    const struct weights_rival *rivals = weights_rivals(scratch->weights, WEIGHTS_MAIN, &count);
    *ret_expected = rest_of_all(asker) - barred_rest;
    int result = gather_rivals(asker, rivals, count, ret_count, ret_expected);
    return result == 0 ? gather_rivals(asker, scratch->lifted, scratch->lifted_count, ret_count,
                                       ret_expected)
                       : result;
}

/*
 * Every tag that may be proposed, one by one: for an item without a known word, and where a floor
 * of next to nothing asks for more tags than the item touches. Tags above the floor score are left
 * out when they have been gathered before.
 */
static int gather_every(const struct asker *asker, bool touched_too, size_t *ret_count,
                        chance_sum *ret_sum)
{
    chance_sum sum = 0;
    for (uint32_t tag = 0; tag < asker->model->tag_count; tag++) {
        double score = (double)model_score(asker->model, asker->scratch, tag);
        double honest = score - (double)asker->scratch->own[tag];
        if (!is_open(asker, tag) || (!touched_too && honest > CALIBRATORS_FLOOR_SCORE)) {
            continue;
        }
        double chance = tag_chance(asker, tag, honest);
        sum += to_sum(chance);
        if (chance >= asker->question->floor &&
            add_candidate(asker, tag, score, chance, ret_count) < 0) {
            return -ENOMEM;
        }
    }
    *ret_sum = sum;
    return 0;
}

static int gather(const struct asker *asker, chance_sum barred_rest, size_t *ret_count,
                  chance_sum *ret_expected)
{
    if (asker->by_prevalence) {
        return gather_every(asker, true, ret_count, ret_expected);
    }
    int result = gather_touched(asker, barred_rest, ret_count, ret_expected);
    if (result == 0 && *ret_count < asker->question->most &&
        asker->question->floor <= asker->scratch->most_of_rest) {
        chance_sum counted_already = 0;
        result = gather_every(asker, false, ret_count, &counted_already);
    }
    return result;
}

/* --- the words that speak for a tag -------------------------------------------------------------
 */

/* Puts a word into its place among the gap's words, by falling share; the last one may drop out. */
static void insert_word(struct model_gap *gap, uint32_t feature, double share)
{
    size_t at = gap->word_count;
    if (at < MODEL_WHY_WORDS) {
        gap->word_count++;
    } else if (gap->words[--at].share >= share) {
        return;
    }
    while (at > 0 && gap->words[at - 1].share < share) {
        gap->words[at] = gap->words[at - 1];
        at--;
    }
    gap->words[at].feature = feature;
    gap->words[at].share = share;
}

static void explain_gap(const struct asker *asker, struct model_gap *gap, const float *parts)
{
    double positive =
        fmax((double)weights_bias(asker->model->weights, WEIGHTS_MAIN, gap->tag).value, 0.0);
    for (size_t i = 0; i < asker->scratch->x_count; i++) {
        positive += fmax((double)parts[i], 0.0);
    }
    for (size_t i = 0; i < asker->scratch->x_count; i++) {
        if (parts[i] > 0.0F) {
            insert_word(gap, asker->scratch->feature_of_x[i], (double)parts[i] / positive);
        }
    }
}

static int explain(const struct asker *asker, size_t gap_count)
{
    struct model_scratch *scratch = asker->scratch;
    uint32_t tags[MODEL_MOST_GAPS];
    if (scratch->x_count == 0) {
        return 0; /* no known word, no reason */
    }
    for (size_t i = 0; i < gap_count; i++) {
        tags[i] = scratch->gaps[i].tag;
    }
    if (GROW(&scratch->parts, &scratch->parts_capacity, gap_count * scratch->x_count) < 0) {
        return -ENOMEM;
    }
    int result = weights_explain(asker->model->weights, scratch->base, scratch->x, scratch->x_count,
                                 tags, gap_count, scratch->weights, scratch->parts);
    for (size_t i = 0; i < gap_count && result == 0; i++) {
        explain_gap(asker, &scratch->gaps[i], scratch->parts + i * scratch->x_count);
    }
    return result;
}

/* --- the question -------------------------------------------------------------------------------
 */

/* Scores the question's words, and finds what the item's own share is; *ret_entry is NULL where the
 * worklist has no entry of it. */
static int score_question(const struct model *model, const struct model_question *question,
                          struct model_scratch *scratch, struct worklist_entry *room,
                          const struct worklist_entry **ret_entry)
{
    bool is_filed = question->number > 0;
    int result =
        is_filed ? model_find_entry(model, scratch->base, question->number, room) : -ENOENT;
    if (result < 0 && result != -ENOENT) {
        return result;
    }
    *ret_entry = result == 0 ? room : NULL;
    if (GROW(&scratch->barred, &scratch->barred_capacity, model->tag_count) < 0) {
        return -ENOMEM;
    }
    result =
        model_score_words(model, question->features, question->feature_count, is_filed, scratch);
    return result == 0 ? model_take_own(model, *ret_entry, scratch) : result;
}

/* Gathers the gaps of the question just scored. */
static int gather_gaps(struct asker *asker, size_t *ret_count, chance_sum *ret_expected)
{
    const struct model_question *question = asker->question;
    chance_sum barred_rest =
        bar_tags(asker, question->given, question->given_count, MARK_GIVEN) +
        bar_tags(asker, question->excluded, question->excluded_count, MARK_KNOWN_NOT);
    if (question->tagged) {
        model_find_best(asker->model, asker->scratch);
        asker->promise = model_promise(asker->model, question->checked_below, asker->scratch);
    }
    int result = gather(asker, barred_rest, ret_count, ret_expected);
    unbar_tags(asker, question->given, question->given_count);
    unbar_tags(asker, question->excluded, question->excluded_count);
    return result;
}

int model_ask(const struct model *model, const struct model_question *question,
              struct model_scratch *scratch, struct model_answer *ret_answer)
{
    struct worklist_entry room;
    const struct worklist_entry *entry = NULL;
    int result = score_question(model, question, scratch, &room, &entry);
    if (result < 0) {
        return result;
    }
    refresh_rest(model, scratch);
    struct asker asker = {.model = model,
                          .question = question,
                          .scratch = scratch,
                          .by_prevalence = !weights_speak(scratch->weights)};
    size_t count = 0;
    chance_sum expected = 0;
    result = gather_gaps(&asker, &count, &expected);
    model_clear_own(entry, scratch);
    if (result < 0) {
        return result;
    }
    best_gaps_sort(scratch->gaps, count);
    if (question->why && count > 0) {
        result = explain(&asker, count);
    }
    if (result < 0) {
        return result;
    }
    *ret_answer = (struct model_answer){.gaps = scratch->gaps,
                                        .gap_count = count,
                                        .expected = (double)expected / CHANCE_UNIT,
                                        .early = calibrators_early(&model->curves)};
    return 0;
}
