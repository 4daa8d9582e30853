/*
 * standing: how good the learner is, item by item, each scored before it is learned (progressive
 * or prequential figures; Dawid 1984), for ever and over a sliding window, by band, for the learner
 * ('with') and for a shadow learner without the correction ('without'), which may be absent.
 *
 * What is kept are sums over blocks of 64 items: a ring of the newest 512 blocks for the window,
 * and at most 64 segments of equally many items for all time. When the segments are full,
 * neighbours are merged and the length doubles. Nothing is ever taken out of a sum, so nothing
 * drifts. A value that nothing is known of is NaN. All memory (3.4 MB) is allocated once.
 *
 * Pure numbers: the same calls give the same bits. Nothing is locked: the owner says which thread
 * adds, and lets many read while none does.
 */
#ifndef UNDERTAG_STANDING_H
#define UNDERTAG_STANDING_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "daemon/learner/ranking.h"
#include "daemon/learner/reliability.h"

/* By the tag's count when the item came in. */
enum standing_band {
    STANDING_ALL,
    STANDING_HEAD,  /* 1000 items or more */
    STANDING_TORSO, /* 30 to 999 */
    STANDING_TAIL,  /* under 30 */
    STANDING_BANDS
};

enum {
    STANDING_BLOCK_ITEMS = 64,
    STANDING_BLOCKS = 512, /* so a window covers up to 32,768 items, and at least 32,705 */
    STANDING_SEGMENTS = 64,
    STANDING_PART_VALUES = 200 /* at most, to a stored part */
};

struct standing;

/* Returns 0 or -ENOMEM. */
int standing_new(struct standing **ret_standing) __attribute__((warn_unused_result));
void standing_free(struct standing *standing);
uint64_t standing_bytes(const struct standing *standing);

/* "all", "head", "torso", "tail". */
const char *standing_band_name(enum standing_band band);

/* Head, torso or tail; and the least count of each of the three. */
enum standing_band standing_band_of(double tag_count);
double standing_band_from(enum standing_band band);

/*
 * Adds an item. For each band, by enum standing_band: the given tags of the band, and the learner's
 * first ten proposals from among the tags of the band (STANDING_ALL: from all). `without` is the
 * shadow learner's STANDING_BANDS lists, or NULL. An item without a given tag in a band does not
 * count in that band; one without any still counts as an item. Nothing is kept of the arguments.
 */
void standing_add(struct standing *standing, const struct ranking_truth truths[STANDING_BANDS],
                  const struct ranking_list with[STANDING_BANDS],
                  const struct ranking_list *without);

/* Says that a proposal shown with `chance`, in [0, 1], was ruled on. */
void standing_ruled(struct standing *standing, double chance, bool confirmed);

/* --- asking -------------------------------------------------------------------------------------
 */

/* Σa/Σb and its standard error: the delta method for a ratio of sums over n items,
 * √(n/(n - 1)·Σ(a - value·b)²)/Σb (Cochran, Sampling Techniques, 1977, from memory). */
struct standing_figure {
    double value;
    double error; /* NaN below two items */
};

/*
 * Over the items that both learners scored; their bases are the same, so the relative gain is
 * value = Σa_with/Σa_without - 1. low and high are its 90 % interval by the delta method on the
 * paired amounts. `p` is of the two-sided sign test: the chance of as uneven a split of
 * wins + losses items if both were as likely; 1 where no item differs.
 */
struct standing_gain {
    double value;
    double low;
    double high;
    uint64_t wins; /* items whose amount is greater with than without */
    uint64_t losses;
    double p;
};

/* The arrays are by enum ranking_figure. */
struct standing_in_band {
    uint64_t items;  /* that have a given tag of the band */
    uint64_t paired; /* of these, those that the shadow scored too: for `without` and `gain` */
    struct standing_figure with[RANKING_FIGURES];
    struct standing_figure without[RANKING_FIGURES];
    struct standing_gain gain[RANKING_FIGURES]; /* p is NaN where `paired` is 0 */
};

struct standing_answer {
    uint64_t items; /* really covered, those without a given tag included */
    struct standing_in_band bands[STANDING_BANDS];
};

/* Items added so far. */
uint64_t standing_items(const struct standing *standing);

/*
 * The figures of the newest `window` items, rounded up to whole blocks (the open one included) and
 * down to what the ring holds; 0 for all items ever.
 */
void standing_ask(const struct standing *standing, uint64_t window,
                  struct standing_answer *ret_answer);

/* A stretch of time, all bands together. */
struct standing_point {
    uint64_t items;
    double with[RANKING_FIGURES];
    double without[RANKING_FIGURES]; /* NaN where there was no shadow */
};

/* From the first item on, in order; returns how many points there are. All cover as many items but
 * the last, which is still growing. */
size_t standing_history(const struct standing *standing,
                        struct standing_point ret_points[STANDING_SEGMENTS]);

void standing_reliability(const struct standing *standing,
                          struct reliability_row ret_rows[RELIABILITY_CLASSES]);

/* --- for those who store it ---------------------------------------------------------------------
 * The state in numbered parts. Those changed since the last standing_clean are to be stored
 * together, in one transaction; a part that was never stored need not be restored. After that every
 * figure is the same to the last bit. */

/* Parts are numbered from 0 to below this; it never changes. */
size_t standing_part_count(void);

bool standing_part_changed(const struct standing *standing, size_t part);

/* Returns how many values the part has: 1 to STANDING_PART_VALUES, fewer where there is little. */
size_t standing_part_get(const struct standing *standing, size_t part,
                         double ret_values[STANDING_PART_VALUES]);

/* Marks everything as stored. */
void standing_seal(struct standing *standing);
void standing_stored(struct standing *standing);
void standing_clean(struct standing *standing);

/* Puts back what was stored, into a new standing, in any order; nothing is marked as changed.
 * Returns 0, or -EINVAL, and changes nothing, for what cannot be that part. */
int standing_part_restore(struct standing *standing, size_t part, const double *values,
                          size_t count) __attribute__((warn_unused_result));

#endif
