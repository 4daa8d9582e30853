/*
 * worklist: for each filed item the tags that it most probably lacks, with scores that have not
 * seen the item itself, kept as the model moves. Chances are read off the scores when they are
 * wanted, so that they are always today's.
 *
 * An entry is made from the scores before the item is learned. What learning the item has then
 * added to each score (its own share) is kept apart: when the item is scored again later, the share
 * is taken out. The linear scorer makes that exact but for what the item's steps changed in the
 * steps of others. What was learned stays as it was, whenever and however often there is time to
 * score again: what people say of the item later is counted by it.
 *
 * Only what has changed and is not stored lies in memory; the rest is read from the base (base.h)
 * that each call is given, which has what worklist_stored was last told of, or has the changes in
 * it already. Counts are kept, not taken. Numbers of items are from 1 on.
 *
 * Pure: no clock, no I/O of its own; what it says is a function of the calls, however often what
 * has changed was stored in between. Not locked: many threads may read, each through a base of its
 * own, while nobody changes it. What reads returns 0, -ENOENT where there is no such entry, or the
 * base's -EIO or -ENOMEM; -EIO too where the base holds what cannot be.
 */
#ifndef UNDERTAG_WORKLIST_H
#define UNDERTAG_WORKLIST_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum {
    WORKLIST_GAPS = 12,
    WORKLIST_PART_VALUES = 128 /* at most, to a stored part */
};

struct base;

/* One tag that the item may lack. */
struct worklist_gap {
    uint32_t tag;
    float score; /* without the item's own share */
};

/* A pair of the item with a tag that it lacked, as it was learned. */
struct worklist_pair {
    uint32_t tag;
    float counted; /* the score with which it was counted as evidence */
    float own;     /* what learning the item has added to the tag's score; mostly below 0 */
};

struct worklist_entry {
    uint64_t number;  /* of the item: the seq of its record */
    uint64_t scored;  /* the latest number when the scores were made */
    uint64_t counted; /* the items behind the evidence when the pairs were counted */
    float promise;    /* of all likely tags, when the scores were made; see agreement.h */
    uint32_t gap_count;
    struct worklist_gap gaps[WORKLIST_GAPS]; /* the likeliest first, when the scores were made */
    uint32_t pair_count;
    struct worklist_pair pairs[WORKLIST_GAPS]; /* the gaps of the day on which it was learned */
};

struct worklist;

int worklist_new(struct worklist **ret_worklist) __attribute__((warn_unused_result));
void worklist_free(struct worklist *worklist);

/* How many entries there are, stored ones and others. */
size_t worklist_size(const struct worklist *worklist);

/* Memory of what has changed and of the counts. */
uint64_t worklist_bytes(const struct worklist *worklist);

/* --- reading ------------------------------------------------------------------------------------
 */

/* The entry of an item. */
int worklist_find(const struct worklist *worklist, const struct base *base, uint64_t number,
                  struct worklist_entry *ret_entry) __attribute__((warn_unused_result));

/* The entry with the next greater number; -ENOENT behind the last. From 0 on it leads through all
 * entries. */
int worklist_after(const struct worklist *worklist, const struct base *base, uint64_t number,
                   struct worklist_entry *ret_entry) __attribute__((warn_unused_result));

/*
 * How many entries have scores older than `scored`, without reading any. Where numbers have become
 * great, `scored` is rounded down a little (by less than a part in 2,048 of the greatest one), so
 * that what is counted as stale really is.
 */
size_t worklist_count_stale(const struct worklist *worklist, uint64_t scored);

/* --- changing: 0, -ENOMEM or -EIO, with nothing changed -----------------------------------------
 */

/* Puts an entry in, in the place of the one with its number. */
int worklist_put(struct worklist *worklist, const struct base *base,
                 const struct worklist_entry *entry) __attribute__((warn_unused_result));

/* Takes an entry out, if it is there. */
int worklist_remove(struct worklist *worklist, const struct base *base, uint64_t number)
    __attribute__((warn_unused_result));

/*
 * The next entry in turn, by number and round again, of those that worklist_count_stale counts, for
 * scoring it again; -ENOENT, and nothing is read, when it counts none. Others may read at the same
 * time: it changes only whose turn it is.
 */
int worklist_next_stale(struct worklist *worklist, const struct base *base, uint64_t scored,
                        struct worklist_entry *ret_entry) __attribute__((warn_unused_result));

/* --- for those who store it: what has changed and is not stored ---------------------------------
 */

/* Calls `gone` for the number of each stored entry that was taken out, then `put` for each that is
 * new or changed, both by rising number; anything but 0 ends it and is returned. */
int worklist_changes(const struct worklist *worklist,
                     int (*put)(void *user, const struct worklist_entry *entry),
                     int (*gone)(void *user, uint64_t number), void *user)
    __attribute__((warn_unused_result));

/* The counts, in parts that are numbered from 0 to below worklist_part_count, which never changes.
 * worklist_part_get returns how many values a part has: 1 to WORKLIST_PART_VALUES. */
size_t worklist_part_count(void);
bool worklist_part_changed(const struct worklist *worklist, size_t part);
size_t worklist_part_get(const struct worklist *worklist, size_t part,
                         double ret_values[WORKLIST_PART_VALUES]);

/*
 * What worklist_changes has given is on its way to the base, in one transaction; what was sealed
 * before and did not arrive goes with it. The parts count as unchanged from here on. Returns 0, or
 * -ENOMEM with everything still to be stored.
 */
int worklist_seal(struct worklist *worklist) __attribute__((warn_unused_result));

/* It has arrived: it is read from the base from now on, and its memory is given back. */
void worklist_stored(struct worklist *worklist);

/* Everything has been stored, sealed or not. */
void worklist_clean(struct worklist *worklist);

/*
 * Puts the counts back, into a new worklist, in any order; a part that was never stored need not
 * be. Returns 0, or -EINVAL for what cannot be that part. Then worklist_restored: 0, or -EINVAL
 * where the parts do not belong together.
 */
int worklist_part_restore(struct worklist *worklist, size_t part, const double *values,
                          size_t count) __attribute__((warn_unused_result));
int worklist_restored(struct worklist *worklist) __attribute__((warn_unused_result));

#endif
