/*
 * The page as a whole: its head, what it says first, the sections, and its foot.
 */
#include "client/report.h"

#include <math.h>

#include "client/command.h"
#include "client/format.h"
#include "client/report_parts.h"
#include "client/svg.h"

/* --- what the sections share ---------------------------------------------------------------- */

void report_section(struct html *html, const char *heading)
{
    html_put(html, "<section>\n<div class=\"say\">\n<h2>");
    html_text(html, heading);
    html_put(html, "</h2>\n");
}

void report_figure(struct html *html)
{
    html_put(html, "</div>\n<div class=\"show\">\n");
}

void report_section_end(struct html *html)
{
    html_put(html, "</div>\n</section>\n");
}

void report_percent(struct html *html, double share)
{
    char figure[FORMAT_BYTES];
    html_put(html, "%s", isfinite(share) ? format_percent(share, figure) : "\u2013");
}

void report_bar(struct html *html, double share, double low, double high)
{
    const struct svg_scale across = {.from = 0, .to = 1, .start = 0, .end = 240};
    if (!isfinite(share)) {
        return;
    }
    html_put(html, "<svg class=\"bar\" viewBox=\"0 0 240 14\" preserveAspectRatio=\"none\" "
                   "aria-hidden=\"true\">\n");
    svg_rect(html, "track", 0, 2, 240, 10);
    svg_rect(html, "fill", 0, 2, fmax(svg_at(&across, share), share > 0 ? 1 : 0), 10);
    if (isfinite(low) && isfinite(high)) {
        double from = svg_at(&across, low);
        double to = svg_at(&across, high);
        svg_line(html, "halo", from, 7, to, 7);
        svg_line(html, "reach", from, 7, to, 7);
        svg_line(html, "reach", from, 0, from, 14);
        svg_line(html, "reach", to, 0, to, 14);
    }
    svg_end(html);
}

void report_count_cell(struct html *html, double count)
{
    char figure[FORMAT_BYTES];
    html_put(html, "<td class=\"n\">%s</td>",
             isfinite(count) ? format_amount(count, figure) : "\u2013");
}

void report_share_cells(struct html *html, const struct reply_estimate *x)
{
    report_count_cell(html, x->given);
    report_count_cell(html, x->missing);
    html_put(html, "<td class=\"n\">");
    report_percent(html, x->share);
    html_put(html, "</td><td class=\"n soft\">");
    if (isfinite(x->low) && isfinite(x->high)) {
        report_percent(html, x->low);
        html_put(html, " to ");
        report_percent(html, x->high);
    } else {
        html_put(html, "\u2013");
    }
    html_put(html, "</td><td class=\"b\">");
    report_bar(html, x->share, x->low, x->high);
    html_put(html, "</td></tr>\n");
}

/* --- head, first words, foot ---------------------------------------------------------------- */

static void write_head(struct html *html)
{
    html_put(html,
             "<!DOCTYPE html>\n<html lang=\"en\">\n<head>\n<meta charset=\"utf-8\">\n"
             "<meta name=\"viewport\" content=\"width=device-width, initial-scale=1\">\n"
             "<meta http-equiv=\"Content-Security-Policy\" content=\"default-src 'none'; "
             "style-src 'unsafe-inline'\">\n"
             "<title>Tagging report</title>\n<style>\n%s</style>\n</head>\n<body>\n<main>\n",
             REPORT_STYLE);
}

/* The day and time in UTC, in English whatever the locale: undertag sets none. */
static void write_when(struct html *html, time_t made_at)
{
    struct tm time;
    char day[64] = "";
    if (gmtime_r(&made_at, &time)) {
        (void)strftime(day, sizeof day, "%-d %B %Y, %H:%M UTC", &time); /* 64 bytes are enough */
    }
    html_put(html, "<h1>Tagging report</h1>\n<p class=\"when\">%s</p>\n", day);
}

static void write_lead(struct html *html, const struct reply_estimate *all, const json_t *state)
{
    char items[FORMAT_BYTES];
    char missing[FORMAT_BYTES];
    char share[FORMAT_BYTES];
    if (command_whole(state, "items") == 0) {
        html_put(html, "<p class=\"lead\">Nothing has been filed yet. File items with 'undertag "
                       "file', and write this report again.</p>\n");
    } else if (!isfinite(all->share)) {
        html_put(html, "<p class=\"lead\">%s items are filed, and no tag has been given yet.</p>\n",
                 format_count(command_whole(state, "items"), items));
    } else {
        html_put(html,
                 "<p class=\"lead\">%s of the tags that belong to %s items are on record; about %s "
                 "are missing.</p>\n",
                 format_percent(all->share, share),
                 format_count(command_whole(state, "items"), items),
                 format_about(all->missing, missing));
    }
}

/* A ruler from 0 to 100 %, filled to the share on record. */
static void write_ruler(struct html *html, const struct reply_estimate *all)
{
    const struct svg_scale across = {.from = 0, .to = 100, .start = 14, .end = 986};
    if (!isfinite(all->share)) {
        return;
    }
    svg_begin(html, "ruler", 1000, 74, "The share of the true tags that is on record");
    svg_rect(html, "track", across.start, 16, across.end - across.start, 22);
    svg_rect(html, "fill", across.start, 16, svg_at(&across, 100 * all->share) - across.start, 22);
    if (isfinite(all->low) && isfinite(all->high)) {
        double from = svg_at(&across, 100 * all->low);
        double to = svg_at(&across, 100 * all->high);
        svg_line(html, "reach", from, 6, to, 6);
        svg_line(html, "reach", from, 6, from, 16);
        svg_line(html, "reach", to, 6, to, 16);
    }
    for (int tick = 0; tick <= 100; tick += 2) {
        double x = svg_at(&across, tick);
        svg_line(html, "axis", x, 38, x, tick % 10 == 0 ? 50 : 43);
        if (tick % 20 == 0) {
            char label[16];
            (void)snprintf(label, sizeof label, "%d %%", tick);
            svg_label(html, "", x, 66, "middle", label);
        }
    }
    svg_end(html);
}

static void write_foot(struct html *html, const json_t *state)
{
    static const char *const TOTALS[] = {"items", "tags", "words", "weights"};
    char figure[FORMAT_BYTES];
    char learned[FORMAT_BYTES];
    html_put(html,
             "<footer>\n<p><strong>Proposals and estimates are aids: an editor decides.</strong> "
             "Tags that say something about people, their health, faith or origin, or about "
             "safety, need a qualified eye before they are given or taken off.</p>\n"
             "<p>The daemon holds");
    for (size_t i = 0; i < sizeof TOTALS / sizeof TOTALS[0]; i++) {
        html_put(html, "%s %s %s", i > 0 ? "," : "",
                 format_count(command_whole(state, TOTALS[i]), figure), TOTALS[i]);
    }
    html_put(html, ", and has learned up to change %s of %s. Written by undertag from undertagd ",
             format_count(command_whole(state, "learned"), learned),
             format_count(command_whole(state, "seq"), figure));
    html_text(html, command_text(state, "version"));
    html_put(html, ".</p>\n</footer>\n");
}

int report_write(const struct report *report, char **ret_page, size_t *ret_length)
{
    struct html html;
    const struct reply_estimate all =
        reply_estimate(json_object_get(report->completeness, "overall"));
    if (html_open(&html)) {
        return -1;
    }
    write_head(&html);
    write_when(&html, report->made_at);
    write_lead(&html, &all, report->state);
    write_ruler(&html, &all);
    report_completeness(&html, report->completeness);
    report_losses(&html, report->completeness);
    report_tag_curve(&html, &report->curve);
    report_history(&html, report->standing);
    report_reliability(&html, report->standing);
    report_worklist(&html, report->worklist);
    write_foot(&html, report->state);
    html_put(&html, "</main>\n</body>\n</html>\n");
    return html_close(&html, ret_page, ret_length);
}
