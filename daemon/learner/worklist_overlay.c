/*
 * The changes lie in order, in blocks that are split when they are full, so that little has to move
 * for a new one. The entries lie apart from them and close up: what is taken out leaves its place
 * to the last.
 */
#include "daemon/learner/worklist_overlay.h"

#include <assert.h>
#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/grow.h"

#define OVERLAY_GONE UINT32_MAX

enum {
    BLOCK_CHANGES = 256
};

struct overlay_block {
    size_t count;
    struct worklist_change changes[BLOCK_CHANGES];
};

/* Where a number is or would be; `at` may be one behind the block's last. */
struct spot {
    size_t block;
    size_t at;
};

void overlay_clear(struct worklist_overlay *overlay)
{
    for (size_t i = 0; i < overlay->block_count; i++) {
        free(overlay->blocks[i]);
    }
    free(overlay->blocks);
    free(overlay->entries);
    *overlay = (struct worklist_overlay){0};
}

bool overlay_is_empty(const struct worklist_overlay *overlay)
{
    return overlay->block_count == 0;
}

uint64_t overlay_bytes(const struct worklist_overlay *overlay)
{
    return overlay->block_capacity * sizeof(struct overlay_block *) +
           overlay->block_count * sizeof(struct overlay_block) +
           overlay->entry_capacity * sizeof *overlay->entries;
}

/* --- finding ------------------------------------------------------------------------------------
 */

/* The last block that begins with the number or a smaller one; the first where none does. */
static size_t find_block(const struct worklist_overlay *overlay, uint64_t number)
{
    size_t low = 0;
    size_t high = overlay->block_count;
    while (high - low > 1) {
        size_t middle = low + (high - low) / 2;
        if (overlay->blocks[middle]->changes[0].number <= number) {
            low = middle;
        } else {
            high = middle;
        }
    }
    return low;
}

/* There is a block. */
static struct spot find_spot(const struct worklist_overlay *overlay, uint64_t number)
{
    struct spot spot = {.block = find_block(overlay, number)};
    const struct overlay_block *block = overlay->blocks[spot.block];
    size_t high = block->count;
    while (spot.at < high) {
        size_t middle = spot.at + (high - spot.at) / 2;
        if (block->changes[middle].number < number) {
            spot.at = middle + 1;
        } else {
            high = middle;
        }
    }
    return spot;
}

static struct worklist_change *find_change(const struct worklist_overlay *overlay, uint64_t number)
{
    if (overlay->block_count == 0) {
        return NULL;
    }
    struct spot spot = find_spot(overlay, number);
    struct overlay_block *block = overlay->blocks[spot.block];
    return spot.at < block->count && block->changes[spot.at].number == number
               ? &block->changes[spot.at]
               : NULL;
}

const struct worklist_change *overlay_find(const struct worklist_overlay *overlay, uint64_t number)
{
    return find_change(overlay, number);
}

const struct worklist_change *overlay_after(const struct worklist_overlay *overlay, uint64_t number)
{
    if (overlay->block_count == 0 || number == UINT64_MAX) {
        return NULL;
    }
    struct spot spot = find_spot(overlay, number + 1);
    if (spot.at < overlay->blocks[spot.block]->count) {
        return &overlay->blocks[spot.block]->changes[spot.at];
    }
    return spot.block + 1 < overlay->block_count ? &overlay->blocks[spot.block + 1]->changes[0]
                                                 : NULL;
}

const struct worklist_entry *overlay_entry(const struct worklist_overlay *overlay,
                                           const struct worklist_change *change)
{
    return change->place == OVERLAY_GONE ? NULL : &overlay->entries[change->place];
}

/* --- changes in their order ---------------------------------------------------------------------
 */

/* Puts an empty block in, which is to be filled at once. */
static int add_block(struct worklist_overlay *overlay, size_t at)
{
    if (grow_array((void **)&overlay->blocks, &overlay->block_capacity, overlay->block_count + 1,
                   sizeof(struct overlay_block *)) < 0) {
        return -ENOMEM;
    }
    struct overlay_block *added = malloc(sizeof *added);
    if (!added) {
        return -ENOMEM;
    }
    added->count = 0;
    memmove(&overlay->blocks[at + 1], &overlay->blocks[at],
            (overlay->block_count - at) * sizeof(struct overlay_block *));
    overlay->blocks[at] = added;
    overlay->block_count++;
    return 0;
}

/* Moves the upper half of a full block into one of its own. */
static int split_block(struct worklist_overlay *overlay, size_t at)
{
    if (add_block(overlay, at + 1) < 0) {
        return -ENOMEM;
    }
    struct overlay_block *full = overlay->blocks[at];
    struct overlay_block *upper = overlay->blocks[at + 1];
    full->count = BLOCK_CHANGES / 2;
    upper->count = BLOCK_CHANGES - full->count;
    memcpy(upper->changes, &full->changes[full->count], upper->count * sizeof *upper->changes);
    return 0;
}

/* There is no change with its number. */
static int insert_change(struct worklist_overlay *overlay, const struct worklist_change *change)
{
    if (overlay->block_count == 0 && add_block(overlay, 0) < 0) {
        return -ENOMEM;
    }
    struct spot spot = find_spot(overlay, change->number);
    if (overlay->blocks[spot.block]->count == BLOCK_CHANGES) {
        if (split_block(overlay, spot.block) < 0) {
            return -ENOMEM;
        }
        spot = find_spot(overlay, change->number);
    }
    struct overlay_block *block = overlay->blocks[spot.block];
    memmove(&block->changes[spot.at + 1], &block->changes[spot.at],
            (block->count - spot.at) * sizeof *block->changes);
    block->changes[spot.at] = *change;
    block->count++;
    return 0;
}

/* There is a change with that number. */
static void drop_change(struct worklist_overlay *overlay, uint64_t number)
{
    struct spot spot = find_spot(overlay, number);
    struct overlay_block *block = overlay->blocks[spot.block];
    block->count--;
    memmove(&block->changes[spot.at], &block->changes[spot.at + 1],
            (block->count - spot.at) * sizeof *block->changes);
    if (block->count == 0) {
        free(block);
        overlay->block_count--;
        memmove(&overlay->blocks[spot.block], &overlay->blocks[spot.block + 1],
                (overlay->block_count - spot.block) * sizeof(struct overlay_block *));
    }
}

/* --- putting and removing -----------------------------------------------------------------------
 */

int overlay_put(struct worklist_overlay *overlay, const struct worklist_entry *entry,
                bool is_stored)
{
    struct worklist_change *change = find_change(overlay, entry->number);
    if (change && change->place != OVERLAY_GONE) {
        overlay->entries[change->place] = *entry;
        return 0;
    }
    if (overlay->entry_count == OVERLAY_GONE ||
        GROW(&overlay->entries, &overlay->entry_capacity, overlay->entry_count + 1) < 0) {
        return -ENOMEM;
    }
    uint32_t place = (uint32_t)overlay->entry_count;
    if (change) {
        change->place = place;
    } else {
        const struct worklist_change added = {
            .number = entry->number, .place = place, .is_stored = is_stored};
        if (insert_change(overlay, &added) < 0) {
            return -ENOMEM;
        }
    }
    overlay->entries[overlay->entry_count++] = *entry;
    return 0;
}

/* Leaves a place to the last entry. */
static void empty_place(struct worklist_overlay *overlay, uint32_t place)
{
    overlay->entry_count--;
    if (place < overlay->entry_count) {
        const struct worklist_entry *last = &overlay->entries[overlay->entry_count];
        struct worklist_change *change = find_change(overlay, last->number);
        assert(change); /* of every entry that is there */
        change->place = place;
        overlay->entries[place] = *last;
    }
}

int overlay_remove(struct worklist_overlay *overlay, uint64_t number)
{
    struct worklist_change *change = find_change(overlay, number);
    if (!change) {
        const struct worklist_change gone = {
            .number = number, .place = OVERLAY_GONE, .is_stored = true};
        return insert_change(overlay, &gone);
    }
    if (change->place != OVERLAY_GONE) {
        empty_place(overlay, change->place);
        change->place = OVERLAY_GONE;
    }
    if (!change->is_stored) {
        drop_change(overlay, number);
    }
    return 0;
}

int overlay_join(struct worklist_overlay *beneath, struct worklist_overlay *above)
{
    const struct worklist_change *change = NULL;
    for (change = overlay_after(above, 0); change; change = overlay_after(above, change->number)) {
        const struct worklist_entry *entry = overlay_entry(above, change);
        int result = entry ? overlay_put(beneath, entry, change->is_stored)
                           : overlay_remove(beneath, change->number);
        if (result < 0) {
            return result;
        }
    }
    overlay_clear(above);
    return 0;
}
