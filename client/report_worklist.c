/*
 * The head of the worklist.
 */
#include "client/command.h"
#include "client/format.h"
#include "client/report_parts.h"

enum {
    GAPS_MOST = 6 /* of an item */
};

static void write_gaps(struct html *html, const json_t *gaps)
{
    size_t count = json_array_size(gaps);
    for (size_t i = 0; i < count && i < GAPS_MOST; i++) {
        const json_t *gap = json_array_get(gaps, i);
        html_put(html, "<span class=\"gap\">");
        html_text(html, command_text(gap, "tag"));
        html_put(html, " <b>");
        report_percent(html, reply_number(gap, "chance"));
        html_put(html, "</b></span> ");
    }
    if (count > GAPS_MOST) {
        html_put(html, "<span class=\"gap\">and %zu more</span>", count - GAPS_MOST);
    }
}

static void write_item(struct html *html, const json_t *item)
{
    const char *title = command_text(item, "title");
    html_put(html, "<tr><td class=\"name\">");
    html_text(html, command_text(item, "id"));
    if (*title) {
        html_put(html, "<small>");
        html_text(html, title);
        html_put(html, "</small>");
    }
    html_put(html, "</td><td>");
    write_gaps(html, json_object_get(item, "gaps"));
    html_put(html, "</td><td class=\"n\">%.1f</td><td class=\"n\">%.1f</td></tr>\n",
             command_number(item, "expected"), command_number(item, "running"));
}

static size_t rows_of(const json_t *items)
{
    size_t count = json_array_size(items);
    return count < REPORT_ROWS ? count : REPORT_ROWS;
}

void report_worklist(struct html *html, const json_t *worklist)
{
    const json_t *items = json_object_get(worklist, "items");
    size_t rows = rows_of(items);
    char sum[FORMAT_BYTES];
    report_section(html, "Where an hour of work finds most");
    if (rows == 0) {
        report_figure(html);
        html_put(html, "<p>The worklist is empty: no item is likely to lack a tag.</p>\n");
        report_section_end(html);
        return;
    }
    html_put(html, "<p class=\"first\">The first ");
    if (rows > 1) {
        html_put(html, "%zu items", rows);
    } else {
        html_put(html, "item");
    }
    html_put(html,
             " of the worklist should give about %s missing tags.</p>\n<p>Each tag has the chance "
             "that it belongs to the item although it was not given. 'undertag worklist' goes on "
             "with the list.</p>\n",
             format_amount(command_number(json_array_get(items, rows - 1), "running"), sum));
    report_figure(html);
    html_put(html, "<table>\n<thead><tr><th>item</th><th>likely missing, and the chance</th>"
                   "<th class=\"n\">expected</th><th class=\"n\">in all</th></tr></thead>\n"
                   "<tbody>\n");
    for (size_t i = 0; i < rows; i++) {
        write_item(html, json_array_get(items, i));
    }
    html_put(html, "</tbody></table>\n");
    report_section_end(html);
}
