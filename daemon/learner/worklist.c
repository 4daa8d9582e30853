/*
 * A change hides what the base has under its number. Whether there is something beneath a change is
 * found out once, when the change is made; the totals are kept by what a change replaces.
 */
#include "daemon/learner/worklist.h"

#include <assert.h>
#include <errno.h>
#include <stdlib.h>

#include "daemon/base.h"
#include "daemon/learner/worklist_overlay.h"
#include "daemon/learner/worklist_totals.h"

struct worklist {
    struct worklist_overlay overlay; /* what has changed since it was sealed last */
    struct worklist_overlay sealed;  /* beneath it: what is on its way to the base */
    struct worklist_totals totals;
};

int worklist_new(struct worklist **ret_worklist)
{
    struct worklist *made = calloc(1, sizeof *made);
    if (!made) {
        return -ENOMEM;
    }
    *ret_worklist = made;
    return 0;
}

void worklist_free(struct worklist *worklist)
{
    if (!worklist) {
        return;
    }
    overlay_clear(&worklist->overlay);
    overlay_clear(&worklist->sealed);
    free(worklist);
}

size_t worklist_size(const struct worklist *worklist)
{
    return worklist->totals.size;
}

uint64_t worklist_bytes(const struct worklist *worklist)
{
    return sizeof *worklist + overlay_bytes(&worklist->overlay) + overlay_bytes(&worklist->sealed);
}

/* --- reading ------------------------------------------------------------------------------------
 */

static bool is_sound(const struct worklist_entry *entry)
{
    return entry->gap_count <= WORKLIST_GAPS && entry->pair_count <= WORKLIST_GAPS;
}

static int stored_entry(const struct base *base, uint64_t number, struct worklist_entry *ret_entry)
{
    int result = base ? base->entry(base->user, number, ret_entry) : -ENOENT;
    return result == 0 && !(ret_entry->number == number && is_sound(ret_entry)) ? -EIO : result;
}

static int stored_after(const struct base *base, uint64_t number, struct worklist_entry *ret_entry)
{
    int result = base ? base->entry_after(base->user, number, ret_entry) : -ENOENT;
    return result == 0 && !(ret_entry->number > number && is_sound(ret_entry)) ? -EIO : result;
}

/* A change that hides what the base has. */
struct hiding {
    bool is_there;
    uint64_t number;
    const struct worklist_entry *entry; /* NULL: gone */
};

static struct hiding hiding_of(const struct worklist_overlay *overlay,
                               const struct worklist_change *change)
{
    return change ? (struct hiding){.is_there = true,
                                    .number = change->number,
                                    .entry = overlay_entry(overlay, change)}
                  : (struct hiding){0};
}

static struct hiding hiding_at(const struct worklist *worklist, uint64_t number)
{
    const struct worklist_change *change = overlay_find(&worklist->overlay, number);
    return change ? hiding_of(&worklist->overlay, change)
                  : hiding_of(&worklist->sealed, overlay_find(&worklist->sealed, number));
}

/* The one with the next greater number; of two with the same the later. */
static struct hiding hiding_after(const struct worklist *worklist, uint64_t number)
{
    const struct worklist_change *change = overlay_after(&worklist->overlay, number);
    const struct worklist_change *sealed = overlay_after(&worklist->sealed, number);
    return change && (!sealed || change->number <= sealed->number)
               ? hiding_of(&worklist->overlay, change)
               : hiding_of(&worklist->sealed, sealed);
}

int worklist_find(const struct worklist *worklist, const struct base *base, uint64_t number,
                  struct worklist_entry *ret_entry)
{
    struct hiding hiding = hiding_at(worklist, number);
    if (hiding.is_there) {
        if (!hiding.entry) {
            return -ENOENT;
        }
        *ret_entry = *hiding.entry;
        return 0;
    }
    struct worklist_entry stored;
    int result = stored_entry(base, number, &stored);
    if (result == 0) {
        *ret_entry = stored;
    }
    return result;
}

/* Changes are looked at up to the next stored entry; those passed over are gone and are not met
 * again in a walk. */
int worklist_after(const struct worklist *worklist, const struct base *base, uint64_t number,
                   struct worklist_entry *ret_entry)
{
    struct worklist_entry stored;
    int result = stored_after(base, number, &stored);
    struct hiding hiding = hiding_after(worklist, number);
    while (hiding.is_there &&
           (result == -ENOENT || (result == 0 && hiding.number <= stored.number))) {
        if (hiding.entry) {
            *ret_entry = *hiding.entry;
            return 0;
        }
        if (result == 0 && hiding.number == stored.number) {
            result = stored_after(base, hiding.number, &stored);
        }
        hiding = hiding_after(worklist, hiding.number);
    }
    if (result == 0) {
        *ret_entry = stored;
    }
    return result;
}

size_t worklist_count_stale(const struct worklist *worklist, uint64_t scored)
{
    return totals_below(&worklist->totals, scored);
}

/* --- changing -----------------------------------------------------------------------------------
 */

/* What a change of that number replaces, as the totals have it; -EIO where they do not. */
static int find_replaced(const struct worklist *worklist, const struct base *base, uint64_t number,
                         struct worklist_entry *ret_entry)
{
    int result = worklist_find(worklist, base, number, ret_entry);
    return result == 0 && !totals_may_hold(&worklist->totals, ret_entry->scored) ? -EIO : result;
}

int worklist_put(struct worklist *worklist, const struct base *base,
                 const struct worklist_entry *entry)
{
    assert(entry->number > 0);
    struct worklist_entry replaced;
    int result = find_replaced(worklist, base, entry->number, &replaced);
    if (result != 0 && result != -ENOENT) {
        return result;
    }
    bool is_there = result == 0;
    if (overlay_put(&worklist->overlay, entry, is_there) < 0) {
        return -ENOMEM;
    }
    if (is_there) {
        totals_take(&worklist->totals, replaced.scored);
    }
    totals_add(&worklist->totals, entry->scored);
    return 0;
}

int worklist_remove(struct worklist *worklist, const struct base *base, uint64_t number)
{
    struct worklist_entry replaced;
    int result = find_replaced(worklist, base, number, &replaced);
    if (result != 0) {
        return result == -ENOENT ? 0 : result;
    }
    if (overlay_remove(&worklist->overlay, number) < 0) {
        return -ENOMEM;
    }
    totals_take(&worklist->totals, replaced.scored);
    return 0;
}

/* --- turns --------------------------------------------------------------------------------------
 */

/* The first entry behind `number`, up to `last`, with scores from below the limit. */
static int find_stale(const struct worklist *worklist, const struct base *base, uint64_t number,
                      uint64_t last, uint64_t limit, struct worklist_entry *ret_entry)
{
    struct worklist_entry entry = {.number = number};
    do {
        int result = worklist_after(worklist, base, entry.number, &entry);
        if (result < 0) {
            return result;
        }
        if (entry.number > last) {
            return -ENOENT;
        }
    } while (entry.scored >= limit);
    *ret_entry = entry;
    return 0;
}

int worklist_next_stale(struct worklist *worklist, const struct base *base, uint64_t scored,
                        struct worklist_entry *ret_entry)
{
    if (worklist_count_stale(worklist, scored) == 0) {
        return -ENOENT;
    }
    uint64_t limit = totals_limit(&worklist->totals, scored);
    uint64_t turn = worklist->totals.turn;
    int result = find_stale(worklist, base, turn, UINT64_MAX, limit, ret_entry);
    if (result == -ENOENT) {
        result = find_stale(worklist, base, 0, turn, limit, ret_entry);
    }
    if (result == 0) {
        totals_set_turn(&worklist->totals, ret_entry->number);
    }
    return result == -ENOENT ? -EIO : result; /* counted and not there: not the base it was */
}

/* --- storing ------------------------------------------------------------------------------------
 */

int worklist_changes(const struct worklist *worklist,
                     int (*put)(void *user, const struct worklist_entry *entry),
                     int (*gone)(void *user, uint64_t number), void *user)
{
    struct hiding hiding;
    int result = 0;
    for (hiding = hiding_after(worklist, 0); hiding.is_there && result == 0;
         hiding = hiding_after(worklist, hiding.number)) {
        result = hiding.entry ? 0 : gone(user, hiding.number);
    }
    for (hiding = hiding_after(worklist, 0); hiding.is_there && result == 0;
         hiding = hiding_after(worklist, hiding.number)) {
        result = hiding.entry ? put(user, hiding.entry) : 0;
    }
    return result;
}

int worklist_seal(struct worklist *worklist)
{
    if (overlay_is_empty(&worklist->sealed)) {
        overlay_clear(&worklist->sealed);
        worklist->sealed = worklist->overlay;
        worklist->overlay = (struct worklist_overlay){0};
    } else if (overlay_join(&worklist->sealed, &worklist->overlay) < 0) {
        return -ENOMEM;
    }
    totals_seal(&worklist->totals);
    return 0;
}

void worklist_stored(struct worklist *worklist)
{
    totals_stored(&worklist->totals);
    overlay_clear(&worklist->sealed);
}

void worklist_clean(struct worklist *worklist)
{
    overlay_clear(&worklist->overlay);
    overlay_clear(&worklist->sealed);
    totals_clean(&worklist->totals);
}

size_t worklist_part_count(void)
{
    return TOTALS_PARTS;
}

bool worklist_part_changed(const struct worklist *worklist, size_t part)
{
    return part < TOTALS_PARTS && (worklist->totals.changed[part] || worklist->totals.sealed[part]);
}

size_t worklist_part_get(const struct worklist *worklist, size_t part,
                         double ret_values[WORKLIST_PART_VALUES])
{
    return totals_part_get(&worklist->totals, part, ret_values);
}

int worklist_part_restore(struct worklist *worklist, size_t part, const double *values,
                          size_t count)
{
    return totals_part_restore(&worklist->totals, part, values, count);
}

int worklist_restored(struct worklist *worklist)
{
    return totals_restored(&worklist->totals);
}
