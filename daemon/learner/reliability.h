/*
 * reliability: do the chances shown hold? Of the proposals that somebody ruled on, by ten classes
 * of the chance shown with them (0 to .1, …, .9 to 1): how many, their mean chance, and how many
 * were confirmed. Zero-initialised is empty.
 */
#ifndef UNDERTAG_RELIABILITY_H
#define UNDERTAG_RELIABILITY_H

#include <stdbool.h>
#include <stdint.h>

enum {
    RELIABILITY_CLASSES = 10
};

/* One class's raw sums. */
struct reliability_class {
    double shown;
    double chances; /* the sum of the chances shown */
    double confirmed;
};

struct reliability {
    struct reliability_class classes[RELIABILITY_CLASSES];
};

/* A class as it is read. */
struct reliability_row {
    double from;
    double to;
    uint64_t shown;
    double mean_chance; /* NaN where none was shown */
    uint64_t confirmed;
};

/* Counts a ruling; `chance` in [0, 1] as it was shown. A chance on a border goes up; 1 is in the
 * last class. */
void reliability_add(struct reliability *reliability, double chance, bool confirmed);

void reliability_rows(const struct reliability *reliability,
                      struct reliability_row ret_rows[RELIABILITY_CLASSES]);

#endif
