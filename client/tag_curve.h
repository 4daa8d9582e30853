/*
 * tag_curve: how often tags are given, by their rank, thinned out to what a drawing can show. Pure.
 */
#ifndef UNDERTAG_CLIENT_TAG_CURVE_H
#define UNDERTAG_CLIENT_TAG_CURVE_H

#include <stddef.h>

enum {
    TAG_CURVE_POINTS = 640, /* enough for ten million tags */
    TAG_CURVE_BANDS = 3     /* head, torso, tail */
};

struct tag_curve {
    /* Read only. Ranks run from 1; points are dense at first, then 3 % apart. */
    double rank[TAG_CURVE_POINTS];
    double count[TAG_CURVE_POINTS];
    double share[TAG_CURVE_POINTS]; /* on record */
    size_t points;
    size_t band_tags[TAG_CURVE_BANDS];
    double band_uses[TAG_CURVE_BANDS];
    size_t tags;   /* that are given to an item */
    size_t unused; /* that are not */
    /* private */
    double next_rank;
    double last_count;
    double last_share;
};

/* Adds the next tag, by falling count; all zero is a curve without tags. */
void tag_curve_add(struct tag_curve *curve, double count, double share);

/* Once all are added: the last of them is a point in any case. */
void tag_curve_end(struct tag_curve *curve);

#endif
