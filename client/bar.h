/*
 * bar: a share as a one-sided bar, in eighths of a column where blocks can be shown. Pure.
 */
#ifndef UNDERTAG_CLIENT_BAR_H
#define UNDERTAG_CLIENT_BAR_H

#include <stdbool.h>

enum {
    BAR_COLUMNS_MOST = 40,
    BAR_BYTES = 3 * BAR_COLUMNS_MOST + 1
};

/*
 * Writes the bar of `share` of `columns` (1 to BAR_COLUMNS_MOST) to `bar` (BAR_BYTES), without
 * filling it up to its full length. A share below 0 or not a number is drawn as 0, one above 1 as
 * 1; anything above 0 shows at least the smallest mark. Without `unicode` it is made of '#'.
 */
void bar_draw(double share, unsigned columns, bool unicode, char *bar);

/*
 * The same with what is known of the share: full blocks up to `low`, dark ones from there to the
 * share, light ones on to `high`, by whole columns ('#', '=' and '-' without `unicode`). Where
 * `low` or `high` is not a number, the plain bar.
 */
void bar_draw_between(double share, double low, double high, unsigned columns, bool unicode,
                      char *bar);

#endif
