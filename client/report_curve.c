/*
 * How often tags are given, by rank, and above it the share of each one's true uses on record.
 */
#include <math.h>
#include <stdio.h>

#include "client/format.h"
#include "client/report_parts.h"
#include "client/svg.h"

enum {
    WIDTH = 700,
    HEIGHT = 500,
    LEFT = 64,
    RIGHT = 656,
    SHARE_TOP = 34,
    SHARE_BOTTOM = 164,
    COUNT_TOP = 218,
    COUNT_BOTTOM = 446
};

/* The exponent of the next power of ten, at least 1, so that a scale has a length. */
static unsigned decades(double value)
{
    unsigned exponent = 1;
    while (pow(10, exponent) < value) {
        exponent++;
    }
    return exponent;
}

static void tick_label(struct html *html, double x, double y, const char *anchor, double count)
{
    char label[FORMAT_BYTES];
    svg_label(html, "", x, y, anchor, format_count((int64_t)llround(count), label));
}

static void draw_share_frame(struct html *html, const struct svg_scale *up)
{
    for (int percent = 0; percent <= 100; percent += 25) {
        char label[16];
        double y = svg_at(up, percent / 100.0);
        (void)snprintf(label, sizeof label, "%d %%", percent);
        svg_line(html, percent == 0 ? "axis" : "grid", LEFT, y, RIGHT, y);
        svg_label(html, "", LEFT - 8, y + 4, "end", label);
    }
    svg_label(html, "strong", LEFT, SHARE_TOP - 16, "start",
              "share of a tag's true uses on record, by the curve or by checks");
}

static void draw_count_frame(struct html *html, const struct svg_scale *across,
                             const struct svg_scale *up)
{
    for (unsigned i = 0; i <= decades(up->from); i++) {
        double count = pow(10, i);
        double y = svg_at(up, count);
        svg_line(html, i > 0 ? "grid" : "axis", LEFT, y, RIGHT, y);
        tick_label(html, LEFT - 8, y + 4, "end", count);
    }
    for (unsigned i = 0; i <= decades(across->to); i++) {
        double rank = pow(10, i);
        double x = svg_at(across, rank);
        svg_line(html, "grid", x, SHARE_TOP, x, SHARE_BOTTOM);
        svg_line(html, "grid", x, COUNT_TOP, x, COUNT_BOTTOM);
        tick_label(html, x, COUNT_BOTTOM + 20, "middle", rank);
    }
    svg_label(html, "strong", LEFT, COUNT_TOP - 16, "start", "times given");
    svg_label(html, "strong", RIGHT, COUNT_BOTTOM + 42, "end",
              "tags by rank, the one most given first");
}

static void draw(struct html *html, const struct tag_curve *curve)
{
    const struct svg_scale across = {.from = 1,
                                     .to = pow(10, decades((double)curve->tags)),
                                     .start = LEFT,
                                     .end = RIGHT,
                                     .logarithmic = true};
    /* Upwards: the largest value at the top. */
    const struct svg_scale counts = {.from = pow(10, decades(curve->count[0])),
                                     .to = 1,
                                     .start = COUNT_TOP,
                                     .end = COUNT_BOTTOM,
                                     .logarithmic = true};
    const struct svg_scale shares = {.from = 0, .to = 1, .start = SHARE_BOTTOM, .end = SHARE_TOP};
    double x[TAG_CURVE_POINTS];
    double count_y[TAG_CURVE_POINTS];
    double share_y[TAG_CURVE_POINTS];
    for (size_t i = 0; i < curve->points; i++) {
        x[i] = svg_at(&across, curve->rank[i]);
        count_y[i] = svg_at(&counts, curve->count[i]);
        share_y[i] = svg_at(&shares, curve->share[i]);
    }
    svg_begin(html, "wide", WIDTH, HEIGHT,
              "How often tags are given and the share of their uses on record, by rank");
    draw_count_frame(html, &across, &counts);
    draw_share_frame(html, &shares);
    svg_path(html, "curve", x, count_y, curve->points);
    svg_path(html, "curve", x, share_y, curve->points);
    svg_end(html);
}

static void say_bands(struct html *html, const struct tag_curve *curve)
{
    char tags[FORMAT_BYTES];
    char tail[FORMAT_BYTES];
    char share[FORMAT_BYTES];
    double uses = curve->band_uses[0] + curve->band_uses[1] + curve->band_uses[2];
    html_put(html,
             "<p class=\"first\">Tags in use: %s. Given fewer than 30 times: %s, which make up %s "
             "of all tags given.</p>\n",
             format_count((int64_t)curve->tags, tags),
             format_count((int64_t)curve->band_tags[2], tail),
             format_percent(uses > 0 ? curve->band_uses[2] / uses : NAN, share));
    if (curve->unused > 0) {
        html_put(html, "<p>Open and not given to any item: %s.</p>\n",
                 format_count((int64_t)curve->unused, tags));
    }
    html_put(html, "<p>Both scales of the lower drawing grow tenfold from line to line. Further to "
                   "the right tags are rarer, and the line above falls: more of their uses "
                   "are forgotten.</p>\n");
}

void report_tag_curve(struct html *html, const struct tag_curve *curve)
{
    report_section(html, "Common tags and rare ones");
    if (curve->points > 0) {
        say_bands(html, curve);
        report_figure(html);
        draw(html, curve);
    } else {
        report_figure(html);
        html_put(html, "<p>No tag has been given yet.</p>\n");
    }
    report_section_end(html);
}
