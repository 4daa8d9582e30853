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
 * Pure numbers; not locked.
 */
#ifndef UNDERTAG_WORKLIST_H
#define UNDERTAG_WORKLIST_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum {
    WORKLIST_GAPS = 12
};

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

size_t worklist_size(const struct worklist *worklist);
uint64_t worklist_bytes(const struct worklist *worklist);

/* The entry of an item; NULL where there is none. Valid until the worklist changes. */
const struct worklist_entry *worklist_find(const struct worklist *worklist, uint64_t number);

/* The entries by place, from 0 to below the size; a change may move them. */
const struct worklist_entry *worklist_at(const struct worklist *worklist, size_t place);

/* Puts an entry in, in the place of the one with its number. Returns 0 or -ENOMEM. */
int worklist_put(struct worklist *worklist, const struct worklist_entry *entry)
    __attribute__((warn_unused_result));

/* Takes an entry out, if it is there. Returns 0 or -ENOMEM. */
int worklist_remove(struct worklist *worklist, uint64_t number) __attribute__((warn_unused_result));

/*
 * The next entry in turn whose scores are older than `scored`, for scoring it again; NULL when none
 * is. All entries get their turn.
 */
const struct worklist_entry *worklist_next_stale(struct worklist *worklist, uint64_t scored);

/* How many entries have scores older than that. */
size_t worklist_count_stale(const struct worklist *worklist, uint64_t scored);

/* --- for those who store it: what has changed since the last worklist_clean --- */

/* Calls `put` for each entry that is new or changed and `gone` for the number of each that was
 * taken out; anything but 0 ends it and is returned. */
int worklist_changes(const struct worklist *worklist,
                     int (*put)(void *user, const struct worklist_entry *entry),
                     int (*gone)(void *user, uint64_t number), void *user)
    __attribute__((warn_unused_result));
void worklist_clean(struct worklist *worklist);

#endif
