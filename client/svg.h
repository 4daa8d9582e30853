/*
 * svg: drawings within a page: scales, lines, labels. Colours and strokes are the page's classes;
 * coordinates are those of the drawing, whose width on the page is up to the style sheet.
 */
#ifndef UNDERTAG_CLIENT_SVG_H
#define UNDERTAG_CLIENT_SVG_H

#include <stdbool.h>
#include <stddef.h>

#include "client/html.h"

/* Values from..to lie at start..end of the drawing; either may fall. */
struct svg_scale {
    double from;
    double to;
    double start;
    double end;
    bool logarithmic; /* from and to above 0 */
};

/* Where a value lies; beyond the ends, at the end. */
double svg_at(const struct svg_scale *scale, double value);

/* The least of 1, 2 and 5 times a power of ten that divides 0 to `most` in at most `parts`. */
double svg_step(double most, unsigned parts);

/* `title` (our own words) is what a reader who does not see the drawing is told. */
void svg_begin(struct html *html, const char *class_name, double width, double height,
               const char *title);
void svg_end(struct html *html);

void svg_line(struct html *html, const char *class_name, double x1, double y1, double x2,
              double y2);
void svg_rect(struct html *html, const char *class_name, double x, double y, double width,
              double height);

/* A label whose `anchor` ("start", "middle" or "end") is at x, y; our own words. */
void svg_label(struct html *html, const char *class_name, double x, double y, const char *anchor,
               const char *text);

/* A line through the points; one that is not a number breaks it. */
void svg_path(struct html *html, const char *class_name, const double *x, const double *y,
              size_t count);

#endif
