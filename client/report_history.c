/*
 * How good the proposals were over time, with and without the correction.
 */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#include "client/command.h"
#include "client/figures.h"
#include "client/format.h"
#include "client/report_parts.h"
#include "client/svg.h"

enum {
    WIDTH = 340,
    HEIGHT = 230,
    LEFT = 48,
    RIGHT = 326,
    TOP = 34,
    BOTTOM = 186,
    X_PARTS = 5
};

/* One figure over time; arrays of `count` periods. */
struct course {
    size_t count;
    double *until; /* items up to the end of each period */
    double *with;
    double *without;
};

static void course_deinit(struct course *course)
{
    free(course->until);
    free(course->with);
    free(course->without);
}

static int course_init(struct course *course, const json_t *history, const char *name)
{
    size_t count = json_array_size(history);
    double items = 0;
    *course = (struct course){.count = count,
                              .until = calloc(count, sizeof(double)),
                              .with = calloc(count, sizeof(double)),
                              .without = calloc(count, sizeof(double))};
    if (!course->until || !course->with || !course->without) {
        course_deinit(course);
        return -1;
    }
    for (size_t i = 0; i < count; i++) {
        const json_t *period = json_array_get(history, i);
        items += command_number(period, "items");
        course->until[i] = items;
        course->with[i] = reply_number(json_object_get(period, "with"), name);
        course->without[i] = reply_number(json_object_get(period, "without"), name);
    }
    return 0;
}

static void widen(const double *values, size_t count, double *inout_low, double *inout_high)
{
    for (size_t i = 0; i < count; i++) {
        *inout_low = fmin(*inout_low, values[i]); /* fmin and fmax pass over NAN */
        *inout_high = fmax(*inout_high, values[i]);
    }
}

/* Tenths around what the figure reached, at least two of them. */
static struct svg_scale upwards(const struct course *course)
{
    double low = 1;
    double high = 0;
    widen(course->with, course->count, &low, &high);
    widen(course->without, course->count, &low, &high);
    if (high < low) { /* nothing is known */
        low = 0;
        high = 1;
    }
    low = floor(low * 10) / 10;
    high = ceil(high * 10) / 10;
    if (high - low < 0.15) {
        high = fmin(high + 0.1, 1);
        low = high - 0.2 > 0 ? high - 0.2 : 0;
    }
    return (struct svg_scale){.from = low, .to = high, .start = BOTTOM, .end = TOP};
}

static void draw_frame(struct html *html, const struct svg_scale *across,
                       const struct svg_scale *up, const char *name)
{
    double step = up->to - up->from > 0.45 ? 0.2 : 0.1;
    double apart = svg_step(across->to, X_PARTS);
    char label[FORMAT_BYTES];
    for (int i = 0; up->from + i * step <= up->to + 1e-6; i++) {
        double value = up->from + i * step;
        double y = svg_at(up, value);
        svg_line(html, "grid", LEFT, y, RIGHT, y);
        (void)snprintf(label, sizeof label, "%.0f %%", 100 * value);
        svg_label(html, "", LEFT - 6, y + 4, "end", label);
    }
    svg_line(html, "axis", LEFT, BOTTOM, RIGHT, BOTTOM);
    for (int i = 0; i <= X_PARTS && i * apart <= across->to * (1 + 1e-9); i++) {
        double items = i * apart;
        double x = svg_at(across, items);
        svg_line(html, "axis", x, BOTTOM, x, BOTTOM + 4);
        svg_label(html, "", x, BOTTOM + 19, items > 0.9 * across->to ? "end" : "middle",
                  format_count((int64_t)llround(items), label));
    }
    svg_label(html, "strong", 0, TOP - 18, "start", name);
    svg_label(html, "", RIGHT, BOTTOM + 38, "end", "items filed");
}

static void draw_line(struct html *html, const char *class_name, const struct svg_scale *across,
                      const struct svg_scale *up, const struct course *course, const double *values)
{
    double *x = calloc(course->count, sizeof *x);
    double *y = calloc(course->count, sizeof *y);
    if (x && y) {
        for (size_t i = 0; i < course->count; i++) {
            x[i] = svg_at(across, course->until[i]);
            y[i] = isfinite(values[i]) ? svg_at(up, values[i]) : NAN;
        }
        svg_path(html, class_name, x, y, course->count);
    } else {
        html->failed = true;
    }
    free(y);
    free(x);
}

static void draw_panel(struct html *html, const json_t *history, const struct figure *figure)
{
    struct course course;
    if (course_init(&course, history, figure->name)) {
        html->failed = true;
        return;
    }
    const struct svg_scale across = {
        .from = 0, .to = course.until[course.count - 1], .start = LEFT, .end = RIGHT};
    const struct svg_scale up = upwards(&course);
    svg_begin(html, "panel", WIDTH, HEIGHT, figure->full);
    draw_frame(html, &across, &up, figure->full);
    draw_line(html, "other", &across, &up, &course, course.without);
    draw_line(html, "curve", &across, &up, &course, course.with);
    svg_end(html);
    course_deinit(&course);
}

static void draw_key(struct html *html)
{
    svg_begin(html, "key", 700, 26, "Solid: with the correction; dashed: without");
    svg_line(html, "curve", 0, 12, 36, 12);
    svg_label(html, "main", 44, 16, "start", "with the correction for forgotten tags");
    svg_line(html, "other", 330, 12, 366, 12);
    svg_label(html, "beside", 374, 16, "start", "without it");
    svg_end(html);
}

void report_history(struct html *html, const json_t *standing)
{
    static const struct figure SHOWN[] = {{"P@1", "precision at 1"},
                                          {"true P@5", "true precision at 5"},
                                          {"PSP@5", "propensity-scored precision at 5"},
                                          {"R@10", "recall at 10"}};
    const json_t *history = json_object_get(standing, "history");
    report_section(html, "How good the proposals are");
    if (json_array_size(history) == 0) {
        report_figure(html);
        html_put(html, "<p>No figures yet: they come with the items that are filed.</p>\n");
        report_section_end(html);
        return;
    }
    html_put(html, "<p class=\"first\">Each item is scored before it is learned, so these are "
                   "figures for items that the daemon had not seen.</p>\n<p>");
    html_text(html, FIGURES_MEANING);
    html_put(html, "</p>\n");
    report_figure(html);
    draw_key(html);
    html_put(html, "<div class=\"panels\">\n");
    for (size_t i = 0; i < sizeof SHOWN / sizeof SHOWN[0]; i++) {
        draw_panel(html, history, &SHOWN[i]);
    }
    html_put(html, "</div>\n");
    report_section_end(html);
}
