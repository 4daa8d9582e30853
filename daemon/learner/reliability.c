#include "daemon/learner/reliability.h"

#include <assert.h>
#include <math.h>
#include <stddef.h>

/* Borders are compared as they are written down (.3 is 3/10), not as products (.3·10 may round). */
static size_t class_of(double chance)
{
    size_t at = 0;
    while (at + 1 < RELIABILITY_CLASSES && chance >= (double)(at + 1) / RELIABILITY_CLASSES) {
        at++;
    }
    return at;
}

void reliability_add(struct reliability *reliability, double chance, bool confirmed)
{
    assert(chance >= 0.0 && chance <= 1.0);
    struct reliability_class *entry = &reliability->classes[class_of(chance)];
    entry->shown += 1.0;
    entry->chances += chance;
    entry->confirmed += confirmed ? 1.0 : 0.0;
}

void reliability_rows(const struct reliability *reliability,
                      struct reliability_row ret_rows[RELIABILITY_CLASSES])
{
    for (size_t i = 0; i < RELIABILITY_CLASSES; i++) {
        const struct reliability_class *entry = &reliability->classes[i];
        ret_rows[i] = (struct reliability_row){
            .from = (double)i / RELIABILITY_CLASSES,
            .to = (double)(i + 1) / RELIABILITY_CLASSES,
            .shown = (uint64_t)entry->shown,
            .mean_chance = entry->shown > 0.0 ? entry->chances / entry->shown : (double)NAN,
            .confirmed = (uint64_t)entry->confirmed,
        };
    }
}
