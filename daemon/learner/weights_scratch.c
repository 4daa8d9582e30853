#include "daemon/learner/weights_scratch.h"

#include <errno.h>
#include <stdlib.h>

#include "daemon/grow.h"

int weights_scratch_new(struct weights_scratch **ret_scratch)
{
    struct weights_scratch *made = calloc(1, sizeof *made);
    if (!made) {
        return -ENOMEM;
    }
    made->lanes = 1;
    *ret_scratch = made;
    return 0;
}

void weights_scratch_free(struct weights_scratch *scratch)
{
    if (!scratch) {
        return;
    }
    free(scratch->sums);
    free(scratch->touched);
    for (size_t lane = 0; lane < WEIGHTS_LANES; lane++) {
        free(scratch->rivals[lane].list);
    }
    free(scratch->runs);
    free(scratch->marks);
    free(scratch->slot);
    free(scratch->active);
    free(scratch->hits);
    free(scratch->due);
    free(scratch);
}

uint64_t weights_scratch_bytes(const struct weights_scratch *scratch)
{
    size_t by_tag = scratch->lanes_room * sizeof *scratch->sums + sizeof *scratch->touched;
    uint64_t bytes = sizeof *scratch + scratch->tag_capacity * by_tag +
                     scratch->slot_capacity * sizeof *scratch->slot + scratch->mark_capacity +
                     scratch->active_capacity * sizeof *scratch->active +
                     scratch->hit_capacity * sizeof *scratch->hits +
                     scratch->due_capacity * sizeof *scratch->due +
                     scratch->run_capacity * sizeof *scratch->runs;
    for (size_t lane = 0; lane < WEIGHTS_LANES; lane++) {
        bytes += scratch->rivals[lane].capacity * sizeof *scratch->rivals[lane].list;
    }
    return bytes;
}

enum {
    ROOM_PART = 8 /* in reserve, for tags to come */
};

int scratch_reserve_tags(struct weights_scratch *scratch, size_t count, size_t lanes)
{
    scratch->lanes = lanes;
    if (count <= scratch->tag_capacity && lanes <= scratch->lanes_room) {
        return 0;
    }
    size_t wanted = count <= scratch->tag_capacity ? count : count + count / ROOM_PART;
    size_t room = lanes > scratch->lanes_room ? lanes : scratch->lanes_room;
    float *sums = malloc((wanted * room + 1) * sizeof *sums);
    uint32_t *touched = malloc((wanted + 1) * sizeof *touched);
    if (!sums || !touched) {
        free(sums);
        free(touched);
        return -ENOMEM;
    }
    for (size_t i = 0; i < wanted * room; i++) {
        sums[i] = SCRATCH_UNTOUCHED;
    }
    free(scratch->sums);
    free(scratch->touched);
    scratch->sums = sums;
    scratch->touched = touched;
    scratch->tag_capacity = wanted;
    scratch->lanes_room = room;
    return 0;
}

int scratch_reserve_slots(struct weights_scratch *scratch)
{
    size_t tags = scratch->tag_capacity;
    bool has_room = GROW(&scratch->slot, &scratch->slot_capacity, tags * scratch->lanes) == 0 &&
                    GROW(&scratch->marks, &scratch->mark_capacity, tags) == 0;
    return has_room ? 0 : -ENOMEM;
}

/* The number of lanes is a constant where this is called, so that there is no loop over them. */
static inline __attribute__((always_inline)) void clear_sums(struct weights_scratch *scratch,
                                                             size_t lanes)
{
    for (size_t i = 0; i < scratch->touched_count; i++) {
        for (size_t lane = 0; lane < lanes; lane++) {
            scratch->sums[scratch->touched[i] * lanes + lane] = SCRATCH_UNTOUCHED;
        }
    }
    scratch->touched_count = 0;
}

void scratch_clear(struct weights_scratch *scratch)
{
    if (scratch->lanes == WEIGHTS_LANES) {
        clear_sums(scratch, WEIGHTS_LANES);
    } else {
        clear_sums(scratch, 1);
    }
}

void scratch_end_learning(struct weights_scratch *scratch, const struct weights_given *given,
                          size_t given_count)
{
    for (size_t i = 0; i < given_count; i++) {
        scratch->marks[given[i].tag] = 0;
    }
    for (size_t i = 0; i < scratch->active_count; i++) {
        const struct scratch_active *active = &scratch->active[i];
        scratch->slot[active->tag * scratch->lanes + active->lane] = 0;
        scratch->marks[active->tag] = 0;
    }
    scratch->active_count = 0;
    scratch->hit_count = 0;
    scratch->due_count = 0;
}
