/* Part 0 is size, width and turn; each further part is a row of buckets. */
#include "daemon/learner/worklist_totals.h"

#include <assert.h>
#include <errno.h>
#include <string.h>

#include "daemon/learner/part_marks.h"

enum {
    PART_BUCKETS = WORKLIST_PART_VALUES,
    META_VALUES = 4,
    MOST_SHIFT = 52 /* buckets of this width hold any number */
};

/* Whole numbers below this are doubles of their own. */
static const double MOST_COUNT = 9007199254740992.0;

static const double TWO_TO_32 = 4294967296.0;

/* --- counting -----------------------------------------------------------------------------------
 */

static uint64_t bucket_of(const struct worklist_totals *totals, uint64_t scored)
{
    return scored >> totals->shift;
}

static void note_change(struct worklist_totals *totals, uint64_t bucket)
{
    totals->changed[0] = 1;
    totals->changed[1 + bucket / PART_BUCKETS] = 1;
}

static void double_width(struct worklist_totals *totals)
{
    for (size_t i = 0; i < TOTALS_BUCKETS / 2; i++) {
        totals->buckets[i] = totals->buckets[2 * i] + totals->buckets[2 * i + 1];
    }
    memset(&totals->buckets[TOTALS_BUCKETS / 2], 0, TOTALS_BUCKETS / 2 * sizeof *totals->buckets);
    totals->shift++;
    memset(totals->changed, 1, sizeof totals->changed);
}

void totals_add(struct worklist_totals *totals, uint64_t scored)
{
    while (bucket_of(totals, scored) >= TOTALS_BUCKETS) {
        double_width(totals);
    }
    uint64_t bucket = bucket_of(totals, scored);
    totals->buckets[bucket]++;
    totals->size++;
    note_change(totals, bucket);
}

bool totals_may_hold(const struct worklist_totals *totals, uint64_t scored)
{
    uint64_t bucket = bucket_of(totals, scored);
    return bucket < TOTALS_BUCKETS && totals->buckets[bucket] > 0 && totals->size > 0;
}

void totals_take(struct worklist_totals *totals, uint64_t scored)
{
    uint64_t bucket = bucket_of(totals, scored);
    totals->buckets[bucket]--;
    totals->size--;
    note_change(totals, bucket);
}

uint64_t totals_limit(const struct worklist_totals *totals, uint64_t scored)
{
    return bucket_of(totals, scored) << totals->shift;
}

uint64_t totals_below(const struct worklist_totals *totals, uint64_t scored)
{
    uint64_t end = bucket_of(totals, scored);
    uint64_t count = 0;
    for (size_t i = 0; i < end && i < TOTALS_BUCKETS; i++) {
        count += totals->buckets[i];
    }
    return count;
}

void totals_set_turn(struct worklist_totals *totals, uint64_t number)
{
    totals->turn = number;
    totals->changed[0] = 1;
}

/* --- storing ------------------------------------------------------------------------------------
 */

size_t totals_part_get(const struct worklist_totals *totals, size_t part,
                       double ret_values[WORKLIST_PART_VALUES])
{
    assert(part < TOTALS_PARTS);
    if (part == 0) {
        ret_values[0] = (double)totals->size;
        ret_values[1] = (double)totals->shift;
        ret_values[2] = (double)(uint32_t)(totals->turn >> 32U);
        ret_values[3] = (double)(uint32_t)totals->turn;
        return META_VALUES;
    }
    const uint64_t *buckets = &totals->buckets[(part - 1) * PART_BUCKETS];
    for (size_t i = 0; i < PART_BUCKETS; i++) {
        ret_values[i] = (double)buckets[i];
    }
    return PART_BUCKETS;
}

/* Also false for a NaN. */
static bool is_whole(double value, double below)
{
    return value >= 0.0 && value < below && (double)(uint64_t)value == value;
}

static int restore_meta(struct worklist_totals *totals, const double *values, size_t count)
{
    if (count != META_VALUES || !is_whole(values[0], MOST_COUNT) ||
        !is_whole(values[1], (double)MOST_SHIFT + 1.0) || !is_whole(values[2], TWO_TO_32) ||
        !is_whole(values[3], TWO_TO_32)) {
        return -EINVAL;
    }
    totals->size = (uint64_t)values[0];
    totals->shift = (unsigned)values[1];
    totals->turn = (uint64_t)values[2] << 32U | (uint64_t)values[3];
    return 0;
}

static int restore_buckets(uint64_t *buckets, const double *values, size_t count)
{
    if (count != PART_BUCKETS) {
        return -EINVAL;
    }
    for (size_t i = 0; i < count; i++) {
        if (!is_whole(values[i], MOST_COUNT)) {
            return -EINVAL;
        }
    }
    for (size_t i = 0; i < count; i++) {
        buckets[i] = (uint64_t)values[i];
    }
    return 0;
}

int totals_part_restore(struct worklist_totals *totals, size_t part, const double *values,
                        size_t count)
{
    if (part >= TOTALS_PARTS) {
        return -EINVAL;
    }
    return part == 0 ? restore_meta(totals, values, count)
                     : restore_buckets(&totals->buckets[(part - 1) * PART_BUCKETS], values, count);
}

int totals_restored(struct worklist_totals *totals)
{
    uint64_t left = totals->size;
    for (size_t i = 0; i < TOTALS_BUCKETS; i++) {
        if (totals->buckets[i] > left) {
            return -EINVAL;
        }
        left -= totals->buckets[i];
    }
    if (left > 0) {
        return -EINVAL;
    }
    totals_clean(totals);
    return 0;
}

void totals_seal(struct worklist_totals *totals)
{
    part_marks_seal(totals->changed, totals->sealed, TOTALS_PARTS);
}

void totals_stored(struct worklist_totals *totals)
{
    memset(totals->sealed, 0, sizeof totals->sealed);
}

void totals_clean(struct worklist_totals *totals)
{
    totals_stored(totals);
    memset(totals->changed, 0, sizeof totals->changed);
}
