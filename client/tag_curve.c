#include "client/tag_curve.h"

#include <math.h>

static const double APART = 1.03;
static const double HEAD_FROM = 1000; /* uses; design: head from 1,000, torso from 30 */
static const double TORSO_FROM = 30;

static void add_point(struct tag_curve *curve)
{
    if (curve->points < TAG_CURVE_POINTS) {
        curve->rank[curve->points] = (double)curve->tags;
        curve->count[curve->points] = curve->last_count;
        curve->share[curve->points] = curve->last_share;
        curve->points++;
    }
}

void tag_curve_add(struct tag_curve *curve, double count, double share)
{
    if (!(count > 0)) {
        curve->unused++;
        return;
    }
    size_t band = count >= HEAD_FROM ? 0 : count >= TORSO_FROM ? 1 : 2;
    curve->band_tags[band]++;
    curve->band_uses[band] += count;
    curve->tags++;
    curve->last_count = count;
    curve->last_share = share;
    double rank = (double)curve->tags;
    if (rank >= curve->next_rank) {
        add_point(curve);
        curve->next_rank = fmax(rank + 1, rank * APART);
    }
}

void tag_curve_end(struct tag_curve *curve)
{
    if (curve->points > 0 && curve->rank[curve->points - 1] < (double)curve->tags) {
        add_point(curve);
    }
}
