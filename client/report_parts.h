/*
 * report_parts: the sections of the report and what they share. Private to report*.c.
 */
#ifndef UNDERTAG_CLIENT_REPORT_PARTS_H
#define UNDERTAG_CLIENT_REPORT_PARTS_H

#include "client/html.h"
#include "client/reply.h"
#include "client/report.h"

enum {
    REPORT_ROWS = 20 /* of the lists: tags, items */
};

extern const char REPORT_STYLE[];

/* A section: heading, its sentences; then, after report_figure, what they are about. */
void report_section(struct html *html, const char *heading);
void report_figure(struct html *html);
void report_section_end(struct html *html);

/* A share as a bar, with its interval as a line across its end where there is one. */
void report_bar(struct html *html, double share, double low, double high);

/* Cells of a table: figures right. */
void report_count_cell(struct html *html, double count);
void report_share_cells(struct html *html, const struct reply_estimate *x);

/* A percentage, or a dash. */
void report_percent(struct html *html, double share);

void report_completeness(struct html *html, const json_t *completeness);
void report_tag_curve(struct html *html, const struct tag_curve *curve);
void report_history(struct html *html, const json_t *standing);
void report_reliability(struct html *html, const json_t *standing);
void report_losses(struct html *html, const json_t *completeness);
void report_worklist(struct html *html, const json_t *worklist);

#endif
