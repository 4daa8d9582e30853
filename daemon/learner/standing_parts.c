/*
 * Part 0 is how many items there were and the reliability; each further part is one tally. Only the
 * open block's change with an item, its segment's when it closes, all segments' when they merge.
 */
#include "daemon/learner/standing.h"

#include <assert.h>
#include <errno.h>
#include <math.h>
#include <string.h>

#include "daemon/learner/part_marks.h"
#include "daemon/learner/standing_private.h"

enum {
    CLASS_VALUES = 3,
    META_VALUES = 1 + RELIABILITY_CLASSES * CLASS_VALUES
};

/* Whole numbers up to here are doubles of their own. */
static const double MOST_ITEMS = 9007199254740992.0;

size_t standing_part_count(void)
{
    return STANDING_PARTS;
}

bool standing_part_changed(const struct standing *standing, size_t part)
{
    return part < STANDING_PARTS && (standing->changed[part] || standing->sealed[part]);
}

void standing_seal(struct standing *standing)
{
    part_marks_seal(standing->changed, standing->sealed, STANDING_PARTS);
}

void standing_stored(struct standing *standing)
{
    memset(standing->sealed, 0, sizeof standing->sealed);
}

void standing_clean(struct standing *standing)
{
    standing_stored(standing);
    memset(standing->changed, 0, sizeof standing->changed);
}

static size_t meta_values(const struct standing *standing, double *ret_values)
{
    size_t count = 0;
    ret_values[count++] = (double)standing->items;
    for (size_t i = 0; i < RELIABILITY_CLASSES; i++) {
        const struct reliability_class *entry = &standing->reliability.classes[i];
        ret_values[count++] = entry->shown;
        ret_values[count++] = entry->chances;
        ret_values[count++] = entry->confirmed;
    }
    return count;
}

/* Also false for a NaN. */
static bool is_class(const struct reliability_class *entry)
{
    return entry->shown >= 0.0 && entry->shown <= MOST_ITEMS && entry->chances >= 0.0 &&
           entry->chances <= entry->shown && entry->confirmed >= 0.0 &&
           entry->confirmed <= entry->shown;
}

static int meta_restore(struct standing *standing, const double *values, size_t count)
{
    if (count != META_VALUES || !(values[0] >= 0.0 && values[0] < MOST_ITEMS) ||
        values[0] != floor(values[0])) {
        return -EINVAL;
    }
    struct reliability restored;
    for (size_t i = 0; i < RELIABILITY_CLASSES; i++) {
        const double *from = &values[1 + i * CLASS_VALUES];
        restored.classes[i] = (struct reliability_class){from[0], from[1], from[2]};
        if (!is_class(&restored.classes[i])) {
            return -EINVAL;
        }
    }
    standing->items = (uint64_t)values[0];
    standing->reliability = restored;
    return 0;
}

size_t standing_part_get(const struct standing *standing, size_t part,
                         double ret_values[STANDING_PART_VALUES])
{
    assert(part < STANDING_PARTS);
    if (part == STANDING_META_PART) {
        return meta_values(standing, ret_values);
    }
    size_t at = part - 1;
    return tally_values(&standing->cells[at / STANDING_BANDS][at % STANDING_BANDS], ret_values);
}

int standing_part_restore(struct standing *standing, size_t part, const double *values,
                          size_t count)
{
    if (part >= STANDING_PARTS) {
        return -EINVAL;
    }
    if (part == STANDING_META_PART) {
        return meta_restore(standing, values, count);
    }
    size_t at = part - 1;
    return tally_restore(&standing->cells[at / STANDING_BANDS][at % STANDING_BANDS], values, count);
}
