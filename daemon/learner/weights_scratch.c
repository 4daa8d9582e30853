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
    *ret_scratch = made;
    return 0;
}

void weights_scratch_free(struct weights_scratch *scratch)
{
    if (!scratch) {
        return;
    }
    free(scratch->sums);
    free(scratch->is_touched);
    free(scratch->touched);
    free(scratch->is_given);
    free(scratch->slot);
    free(scratch->active);
    free(scratch->hits);
    free(scratch);
}

/* Grows one of several arrays that share their capacity. */
static int grow_from(void *array, size_t capacity, size_t wanted, size_t size)
{
    return grow_array(array, &capacity, wanted, size);
}

int scratch_reserve_tags(struct weights_scratch *scratch, size_t count)
{
    if (count <= scratch->tag_capacity) {
        return 0;
    }
    size_t now = scratch->tag_capacity;
    size_t wanted = count + count / 2;
    /* tag_capacity is raised last: what had grown before a failure is only larger than needed. */
    if (grow_from(&scratch->sums, now, wanted, sizeof *scratch->sums) < 0 ||
        grow_from(&scratch->is_touched, now, wanted, sizeof *scratch->is_touched) < 0 ||
        grow_from(&scratch->touched, now ? now + 1 : 0, wanted + 1, sizeof *scratch->touched) < 0 ||
        grow_from(&scratch->is_given, now, wanted, sizeof *scratch->is_given) < 0 ||
        grow_from(&scratch->slot, now, wanted, sizeof *scratch->slot) < 0) {
        return -ENOMEM;
    }
    scratch->tag_capacity = wanted;
    return 0;
}

void scratch_clear(struct weights_scratch *scratch)
{
    for (size_t i = 0; i < scratch->touched_count; i++) {
        scratch->sums[scratch->touched[i]] = 0.0F;
        scratch->is_touched[scratch->touched[i]] = 0;
    }
    scratch->touched_count = 0;
}

void scratch_end_learning(struct weights_scratch *scratch, const struct weights_given *given,
                          size_t given_count)
{
    for (size_t i = 0; i < given_count; i++) {
        scratch->is_given[given[i].tag] = 0;
    }
    for (size_t i = 0; i < scratch->active_count; i++) {
        scratch->slot[scratch->active[i].tag] = 0;
    }
    scratch->active_count = 0;
    scratch->hit_count = 0;
}
