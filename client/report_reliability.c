/*
 * Whether a chance means what it says: proposals that were ruled on, the chance shown against the
 * share that editors confirmed.
 */
#include <math.h>
#include <stdio.h>

#include "client/command.h"
#include "client/format.h"
#include "client/report_parts.h"
#include "client/svg.h"

enum {
    SIDE = 460,
    LEFT = 58,
    RIGHT = 440,
    TOP = 30,
    BOTTOM = 398,
    LARGEST = 17, /* radius of the largest dot */
    SMALLEST = 3
};

static void draw_frame(struct html *html, const struct svg_scale *across,
                       const struct svg_scale *up)
{
    for (int percent = 0; percent <= 100; percent += 20) {
        char label[16];
        double x = svg_at(across, percent / 100.0);
        double y = svg_at(up, percent / 100.0);
        (void)snprintf(label, sizeof label, "%d %%", percent);
        svg_line(html, percent == 0 ? "axis" : "grid", LEFT, y, RIGHT, y);
        svg_line(html, percent == 0 ? "axis" : "grid", x, TOP, x, BOTTOM);
        svg_label(html, "", LEFT - 8, y + 4, "end", label);
        svg_label(html, "", x, BOTTOM + 20, "middle", label);
    }
    svg_line(html, "even", LEFT, BOTTOM, RIGHT, TOP);
    svg_label(html, "strong", RIGHT, BOTTOM + 44, "end", "chance shown");
    svg_label(html, "strong", LEFT, TOP - 14, "start", "share that editors confirmed");
}

static void draw_dot(struct html *html, const struct svg_scale *across, const struct svg_scale *up,
                     const json_t *bin, double most)
{
    double shown = command_number(bin, "shown");
    double chance = reply_number(bin, "mean_chance");
    char count[FORMAT_BYTES];
    if (!(shown > 0) || !isfinite(chance)) {
        return;
    }
    double x = svg_at(across, chance);
    double y = svg_at(up, command_number(bin, "confirmed") / shown);
    double radius = fmax(LARGEST * sqrt(shown / most), SMALLEST); /* areas are as the counts */
    bool left = x + radius + 50 > RIGHT;
    html_put(html, "<circle class=\"dot\" cx=\"%.1f\" cy=\"%.1f\" r=\"%.1f\"/>\n", x, y, radius);
    svg_label(html, "strong", left ? x - radius - 5 : x + radius + 5, y + 4, left ? "end" : "start",
              format_amount(shown, count));
}

static void sum_up(const json_t *bins, double *ret_ruled, double *ret_most)
{
    size_t i;
    json_t *bin;
    double ruled = 0;
    double most = 0;
    json_array_foreach(bins, i, bin)
    {
        double shown = command_number(bin, "shown");
        ruled += shown;
        most = fmax(most, shown);
    }
    *ret_ruled = ruled;
    *ret_most = most;
}

void report_reliability(struct html *html, const json_t *standing)
{
    const struct svg_scale across = {.from = 0, .to = 1, .start = LEFT, .end = RIGHT};
    const struct svg_scale up = {.from = 0, .to = 1, .start = BOTTOM, .end = TOP};
    const json_t *bins = json_object_get(standing, "reliability");
    double ruled = 0;
    double most = 0;
    char count[FORMAT_BYTES];
    sum_up(bins, &ruled, &most);
    report_section(html, "Whether a chance means what it says");
    if (!(ruled > 0)) {
        report_figure(html);
        html_put(html, "<p>No proposal has been ruled on yet. Rulings ('undertag rule') show "
                       "whether the chances are right.</p>\n");
        report_section_end(html);
        return;
    }
    html_put(html,
             "<p class=\"first\">Proposals that editors ruled on: %s.</p>\n"
             "<p>Each dot stands for those shown with a similar chance; its figure is their "
             "number, and so is its area. On the dotted line, editors confirm as many as the "
             "chances promise. Above it the daemon is too careful, below it too bold. A dot of few "
             "proposals may lie off the line by chance alone.</p>\n",
             format_amount(ruled, count));
    report_figure(html);
    svg_begin(html, "square", SIDE, SIDE, "Chance shown against the share confirmed");
    draw_frame(html, &across, &up);
    for (size_t i = 0; i < json_array_size(bins); i++) {
        draw_dot(html, &across, &up, json_array_get(bins, i), most);
    }
    svg_end(html);
    report_section_end(html);
}
