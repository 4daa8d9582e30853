/*
 * Rehearsal: filed items learned again while there is nothing else to do, with a small step, and
 * with the weights of their words shrunk a little before (weights_shrink): that keeps further
 * looks from fitting what is by chance, so that the figures come near those of a batch solver.
 *
 * The turn goes round by number. An item gets its number when it is filed or revised, which is when
 * it was learned; so the next number is always that of the item learned least recently. Each change
 * brings so many turns as there are passes, so that a desk at rest is rehearsed after a while and
 * stays as it is.
 */
#include <errno.h>

#include "daemon/learner/model.h"
#include "daemon/learner/model_private.h"

/* Turns for each change. Measured on D, whose batch solver has P@1 .883 and PSP@5 .728: two reach
 * .881 and .727, three .884 and .729. */
enum {
    PASSES = 3
};

/* What a loss weighs beside ½‖w‖²: the batch solver's on few tags. */
static const double COST_SMALL = 0.3;
static const double COST_LARGE = 1.0;

/* An item has had its turn. */
static void move_on(struct model_rehearsal *rehearsal, uint64_t number)
{
    rehearsal->at = number;
    rehearsal->turns++;
}

/* For what has been withdrawn or revised there is no turn to be had: no item that is left shall
 * have it instead. */
uint64_t model_rehearsals_due(const struct model *model)
{
    uint64_t due = PASSES * model->latest;
    uint64_t most = PASSES * (uint64_t)worklist_size(model->worklist);
    due -= due < model->rehearsal.turns ? due : model->rehearsal.turns;
    return due < most ? due : most;
}

int model_next_rehearsal(struct model *model, const struct base *base, uint64_t *ret_number)
{
    struct model_rehearsal *rehearsal = &model->rehearsal;
    struct worklist_entry entry;
    int result = worklist_after(model->worklist, base, rehearsal->at, &entry);
    if (result == -ENOENT && rehearsal->at > 0) {
        rehearsal->at = 0;
        rehearsal->rounds++;
        result = worklist_after(model->worklist, base, 0, &entry);
    }
    uint64_t due = model_rehearsals_due(model);
    rehearsal->turns = PASSES * model->latest - due;
    if (result == 0 && due == 0) {
        return -ENOENT;
    }
    if (result == 0) {
        *ret_number = entry.number;
    }
    return result;
}

void model_skip_rehearsal(struct model *model, uint64_t number)
{
    move_on(&model->rehearsal, number);
}

struct model_rehearsal model_rehearsal(const struct model *model)
{
    return model->rehearsal;
}

/* Shrinks the weights of the item's words, before they are scored and learned. */
static int shrink(struct model *model, struct model_scratch *scratch)
{
    const struct weights_shrinkage shrinkage = {.number = model->examples + 1,
                                                .x = scratch->x,
                                                .count = scratch->x_count,
                                                .step = model_rehearsal_step(model),
                                                .cost = model_is_large(model) ? COST_LARGE
                                                                              : COST_SMALL};
    int result = weights_admit(model->weights, scratch->base, scratch->x, scratch->x_count);
    return result == 0 ? weights_shrink(model->weights, &shrinkage) : result;
}

int model_rehearse(struct model *model, const struct model_item *item,
                   struct model_scratch *scratch)
{
    struct worklist_entry entry;
    int result = model_find_entry(model, scratch->base, item->number, &entry);
    if (result == 0) {
        result = model_find_words(model, item->features, item->feature_count, scratch);
    }
    if (result == 0) {
        result = model_weigh_features(model, item->features, item->feature_count, true, scratch);
    }
    if (result == 0) {
        result = shrink(model, scratch);
    }
    if (result == 0) {
        result = model_score_lanes(model, scratch);
    }
    if (result < 0) {
        return result;
    }
    model->version++;
    result = model_learn_weights(model, item, true, &entry, scratch);
    if (result == 0) {
        result = worklist_put(model->worklist, scratch->base, &entry);
    }
    move_on(&model->rehearsal, item->number);
    model->rehearsal.items++;
    return result;
}
