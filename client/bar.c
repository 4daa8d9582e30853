#include "client/bar.h"

#include <assert.h>
#include <math.h>
#include <string.h>

static double between_0_and_1(double share)
{
    if (isnan(share) || share < 0) {
        return 0;
    }
    return share > 1 ? 1 : share;
}

void bar_draw(double share, unsigned columns, bool unicode, char *bar)
{
    /* U+258F (one eighth) to U+2588 (the full block), by eighths. */
    static const char *const BLOCKS[] = {"",       "\u258F", "\u258E", "\u258D", "\u258C",
                                         "\u258B", "\u258A", "\u2589", "\u2588"};
    assert(columns >= 1 && columns <= BAR_COLUMNS_MOST);
    double part = between_0_and_1(share);
    unsigned steps = unicode ? 8 : 1; /* steps a column */
    unsigned full = columns * steps;
    unsigned length = (unsigned)lround(part * (double)full);
    if (part > 0 && length == 0) {
        length = 1;
    }
    char *end = bar;
    for (; length >= steps; length -= steps) {
        end = stpcpy(end, unicode ? BLOCKS[8] : "#");
    }
    (void)stpcpy(end, BLOCKS[length]);
}

void bar_draw_between(double share, double low, double high, unsigned columns, bool unicode,
                      char *bar)
{
    if (isnan(share) || isnan(low) || isnan(high)) {
        bar_draw(share, columns, unicode, bar);
        return;
    }
    assert(columns >= 1 && columns <= BAR_COLUMNS_MOST);
    /* U+2588 full, U+2593 dark, U+2591 light; each from where the one before it ends. */
    const struct {
        double until;
        const char *block;
    } parts[] = {{fmin(low, share), unicode ? "\u2588" : "#"},
                 {share, unicode ? "\u2593" : "="},
                 {fmax(high, share), unicode ? "\u2591" : "-"}};
    char *end = bar;
    *end = '\0';
    unsigned column = 0;
    for (size_t i = 0; i < sizeof parts / sizeof parts[0]; i++) {
        unsigned until = (unsigned)lround(between_0_and_1(parts[i].until) * (double)columns);
        for (; column < until; column++) {
            end = stpcpy(end, parts[i].block);
        }
    }
    if (column == 0 && share > 0) {
        (void)stpcpy(end, parts[1].block);
    }
}
