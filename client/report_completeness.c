/*
 * The sections on completeness: by band, and the tags that lose most.
 */
#include <math.h>
#include <string.h>

#include "client/command.h"
#include "client/format.h"
#include "client/report_parts.h"

static void table_head(struct html *html, const char *what)
{
    html_put(html,
             "<table>\n<thead><tr><th>%s</th><th class=\"n\">given</th><th class=\"n\">missing</th>"
             "<th class=\"n\">on record</th><th "
             "class=\"n soft\">between</th><th></th></tr></thead>\n<tbody>\n",
             what);
}

static void say_source(struct html *html, const char *from, const json_t *checks)
{
    char random[FORMAT_BYTES];
    char picked[FORMAT_BYTES];
    if (strcmp(from, "curve") == 0) {
        html_put(html, "<p>No spot checks stand behind these figures yet: they rest on a published "
                       "curve that knows only how often a tag is given. Draw items with 'undertag "
                       "sample' and check them to learn how it is here.</p>\n");
        return;
    }
    html_put(html, "<p>The figures come from ");
    html_text(html, reply_source(from));
    html_put(html, ": %s items drawn at random and %s picked ones were gone through.</p>\n",
             format_count(command_whole(checks, "random"), random),
             format_count(command_whole(checks, "picked"), picked));
}

static void say_wrong(struct html *html, const json_t *wrong)
{
    char taken[FORMAT_BYTES];
    char seen[FORMAT_BYTES];
    char share[FORMAT_BYTES];
    if (command_whole(wrong, "seen") == 0) {
        return;
    }
    html_put(html,
             "<p>Wrong tags are another matter: of %s tags on randomly checked items, %s "
             "did not belong (%s",
             format_count(command_whole(wrong, "seen"), seen),
             format_count(command_whole(wrong, "wrong"), taken),
             format_percent(reply_number(wrong, "share"), share));
    if (isfinite(reply_number(wrong, "low")) && isfinite(reply_number(wrong, "high"))) {
        html_put(html, ", between ");
        report_percent(html, reply_number(wrong, "low"));
        html_put(html, " and ");
        report_percent(html, reply_number(wrong, "high"));
    }
    html_put(html, ").</p>\n");
}

static void say_second(struct html *html, const json_t *second)
{
    char items[FORMAT_BYTES];
    if (!json_is_object(second)) {
        return;
    }
    html_put(html,
             "<p>%s items were tagged a second time by somebody else. From what the two have "
             "in common, the first found ",
             format_count(command_whole(second, "items"), items));
    report_percent(html, reply_number(second, "found_share"));
    html_put(html, " of the tags.</p>\n");
}

static void write_band(struct html *html, const char *name, const char *about, const json_t *object)
{
    const struct reply_estimate x = reply_estimate(object);
    html_put(html, "<tr><td class=\"name\">%s<small>%s</small></td>", name, about);
    report_share_cells(html, &x);
}

void report_completeness(struct html *html, const json_t *completeness)
{
    const json_t *overall = json_object_get(completeness, "overall");
    const json_t *bands = json_object_get(completeness, "bands");
    report_section(html, "How complete the tagging is");
    html_put(html, "<p class=\"first\">Rare tags are forgotten more often than common ones, so the "
                   "tags are shown in three bands.</p>\n"
                   "<p>'Given' is counted, 'missing' estimated. The bar is the share on record; "
                   "'between', and the bracket across the bar's end, is the range in which that "
                   "share lies with a probability of 90&nbsp;%%.</p>\n");
    say_source(html, command_text(overall, "from"), json_object_get(completeness, "checks"));
    say_wrong(html, json_object_get(completeness, "wrong"));
    say_second(html, json_object_get(completeness, "second"));
    report_figure(html);
    table_head(html, "band");
    write_band(html, "All tags", "together", overall);
    write_band(html, "Head", "given 1,000 times or more", json_object_get(bands, "head"));
    write_band(html, "Torso", "given 30 to 999 times", json_object_get(bands, "torso"));
    write_band(html, "Tail", "given fewer than 30 times", json_object_get(bands, "tail"));
    html_put(html, "</tbody></table>\n");
    report_section_end(html);
}

void report_losses(struct html *html, const json_t *completeness)
{
    const json_t *tags = json_object_get(completeness, "tags");
    report_section(html, "The tags that lose most");
    html_put(html, "<p class=\"first\">By the number of items on which each is expected to be "
                   "missing.</p>\n<p>'undertag worklist --tag TAG' lists the items where one of "
                   "them is most likely missing.</p>\n");
    report_figure(html);
    if (json_array_size(tags) == 0) {
        html_put(html, "<p>There are no tags to show yet.</p>\n");
    } else {
        table_head(html, "tag");
        for (size_t i = 0; i < json_array_size(tags) && i < REPORT_ROWS; i++) {
            const json_t *tag = json_array_get(tags, i);
            const struct reply_estimate x = reply_estimate(tag);
            html_put(html, "<tr><td class=\"name\">");
            html_text(html, command_text(tag, "tag"));
            html_put(html, "</td>");
            report_share_cells(html, &x);
        }
        html_put(html, "</tbody></table>\n");
    }
    report_section_end(html);
}
