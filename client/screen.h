/*
 * screen: what the stream a command writes to can show.
 *
 * Colour is used only on a terminal, never with NO_COLOR set (no-color.org: set and not empty) or
 * with TERM unset or "dumb". Blocks and the ellipsis are used unless LC_ALL, LC_CTYPE or LANG names
 * a character set that is not UTF-8.
 */
#ifndef UNDERTAG_CLIENT_SCREEN_H
#define UNDERTAG_CLIENT_SCREEN_H

#include <stdbool.h>
#include <stdio.h>

enum screen_style {
    SCREEN_PLAIN,
    SCREEN_HEADING,
    SCREEN_BAR,  /* the one hue */
    SCREEN_QUIET /* what explains, beside what is said */
};

struct screen {
    FILE *stream;   /* borrowed */
    unsigned width; /* columns; 0: no terminal, so no limit */
    bool terminal;
    bool renews; /* a terminal that can write a line over */
    bool colour;
    bool unicode;
};

void screen_init(struct screen *screen, FILE *stream);

/* Asks the terminal for its width again: it may have been resized. */
void screen_measure(struct screen *screen);

/* What to write before and after text of that style: "" where there is no colour. */
const char *screen_begin(const struct screen *screen, enum screen_style style);
const char *screen_end(const struct screen *screen, enum screen_style style);

/* The rules above, over the values of the environment (NULL: not set). */
bool screen_wants_colour(bool terminal, const char *no_color, const char *term);
bool screen_wants_unicode(const char *lc_all, const char *lc_ctype, const char *lang);

#endif
