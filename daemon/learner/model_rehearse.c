/*
 * Rehearsal: filed items learned again, in the order of their numbers, while there is nothing else
 * to do. A second look with a small step makes the figures better, a third does not (adaptive
 * gradient descent begins to fit what is by chance), so each item gets one: a round goes from
 * where the last one ended to the latest item of its beginning, and begins once the items beyond
 * are a good part of all.
 */
#include <errno.h>

#include "daemon/learner/model.h"
#include "daemon/learner/model_private.h"

enum {
    ROUND_PART = 8 /* a round begins when an eighth of all numbers is beyond the last one */
};

/* Has come to that number; the last one ends the round. */
static void move_on(struct model_rehearsal *rehearsal, uint64_t number)
{
    rehearsal->at = number;
    rehearsal->rounds += number == rehearsal->until;
}

int model_next_rehearsal(struct model *model, const struct base *base, uint64_t *ret_number)
{
    struct model_rehearsal *rehearsal = &model->rehearsal;
    if (rehearsal->at == rehearsal->until) {
        uint64_t beyond = model->latest - rehearsal->until;
        if (beyond == 0 || beyond < model->latest / ROUND_PART) {
            return -ENOENT;
        }
        rehearsal->until = model->latest;
    }
    struct worklist_entry entry;
    int result = worklist_after(model->worklist, base, rehearsal->at, &entry);
    if (result == -ENOENT || (result == 0 && entry.number > rehearsal->until)) {
        move_on(rehearsal, rehearsal->until);
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
