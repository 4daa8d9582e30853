/*
 * worklist_overlay: entries of the worklist that have changed, and the numbers of those that are
 * gone, in order of number. A change is found, or the next one, in the time of two binary searches.
 *
 * Pure; not locked: many may read while nobody changes it.
 */
#ifndef UNDERTAG_WORKLIST_OVERLAY_H
#define UNDERTAG_WORKLIST_OVERLAY_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "daemon/learner/worklist.h"

struct worklist_change {
    uint64_t number;
    uint32_t place; /* of its entry in `entries`; OVERLAY_GONE */
    bool is_stored; /* something with its number lies beneath */
};

struct overlay_block;

/* Zero-initialised is empty. All members are private. */
struct worklist_overlay {
    struct overlay_block **blocks; /* by number, none of them empty */
    size_t block_count;
    size_t block_capacity;
    struct worklist_entry *entries; /* in no order */
    size_t entry_count;
    size_t entry_capacity;
};

/* Forgets everything and gives the memory back. */
void overlay_clear(struct worklist_overlay *overlay);

bool overlay_is_empty(const struct worklist_overlay *overlay);

uint64_t overlay_bytes(const struct worklist_overlay *overlay);

/* The change with that number, and the first one with a greater number; NULL: none. Valid until the
 * overlay changes. */
const struct worklist_change *overlay_find(const struct worklist_overlay *overlay, uint64_t number);
const struct worklist_change *overlay_after(const struct worklist_overlay *overlay,
                                            uint64_t number);

/* The entry of a change; NULL where it is gone. Valid until the overlay changes. */
const struct worklist_entry *overlay_entry(const struct worklist_overlay *overlay,
                                           const struct worklist_change *change);

/* Puts an entry in, in the place of what has its number; `is_stored` counts where that is nothing.
 * Returns 0, or -ENOMEM with nothing changed. */
int overlay_put(struct worklist_overlay *overlay, const struct worklist_entry *entry,
                bool is_stored) __attribute__((warn_unused_result));

/*
 * Takes out what has that number, or, where that is nothing, what lies beneath. What is not stored
 * leaves nothing behind. Returns 0, or -ENOMEM with nothing changed.
 */
int overlay_remove(struct worklist_overlay *overlay, uint64_t number)
    __attribute__((warn_unused_result));

/*
 * Lays the changes of an overlay over those of the one beneath it, which then has them all; the one
 * above is empty. Returns 0, or -ENOMEM with a part of them in both, which is as good.
 */
int overlay_join(struct worklist_overlay *beneath, struct worklist_overlay *above)
    __attribute__((warn_unused_result));

#endif
