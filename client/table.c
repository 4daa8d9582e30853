#include "client/table.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "client/text.h"

enum {
    GAP = 2,          /* columns between two cells */
    COMFORTABLE = 18, /* a cell is not cut below this to save a column that gives way */
    SHORTEST = 6,     /* a cell is not cut below this at all */
    FIRST_ROWS = 32   /* room made for rows at first */
};

struct table {
    const struct table_column *columns;
    size_t column_count;
    char **cells; /* row after row, each owned */
    size_t row_count;
    size_t row_room;
};

struct table *table_new(const struct table_column *columns, size_t column_count)
{
    struct table *table = calloc(1, sizeof *table);
    if (table) {
        table->columns = columns;
        table->column_count = column_count;
    }
    return table;
}

void table_free(struct table *table)
{
    if (!table) {
        return;
    }
    for (size_t i = 0; i < table->row_count * table->column_count; i++) {
        free(table->cells[i]);
    }
    free(table->cells);
    free(table);
}

size_t table_rows(const struct table *table)
{
    return table->row_count;
}

static int make_room(struct table *table)
{
    if (table->row_count < table->row_room) {
        return 0;
    }
    size_t room = table->row_room > 0 ? 2 * table->row_room : FIRST_ROWS;
    char **cells = reallocarray(table->cells, room * table->column_count, sizeof *cells);
    if (!cells) {
        return -1;
    }
    table->cells = cells;
    table->row_room = room;
    return 0;
}

int table_add(struct table *table, const char *const *cells)
{
    if (make_room(table)) {
        return -1;
    }
    char **row = table->cells + table->row_count * table->column_count;
    for (size_t i = 0; i < table->column_count; i++) {
        row[i] = text_clean(cells[i] ? cells[i] : "", TEXT_ONE_LINE);
        if (!row[i]) {
            while (i > 0) {
                free(row[--i]);
            }
            return -1;
        }
    }
    table->row_count++;
    return 0;
}

static size_t total_width(const size_t *widths, size_t count)
{
    size_t total = 0;
    for (size_t i = 0; i < count; i++) {
        total += widths[i] > 0 ? widths[i] + (total > 0 ? GAP : 0) : 0;
    }
    return total;
}

static void natural_widths(const struct table *table, size_t *widths)
{
    for (size_t i = 0; i < table->column_count; i++) {
        widths[i] = text_width(table->columns[i].heading);
    }
    for (size_t i = 0; i < table->row_count * table->column_count; i++) {
        size_t width = text_width(table->cells[i]);
        size_t *column = &widths[i % table->column_count];
        *column = width > *column ? width : *column;
    }
}

/* How narrow a column may become; `comfort` is what a cell that shortens keeps at least. */
static size_t least_of(const struct table_column *column, size_t width, size_t comfort)
{
    if (!column->shortens) {
        return width;
    }
    size_t heading = text_width(column->heading);
    size_t least = heading > comfort ? heading : comfort;
    return least < width ? least : width;
}

/* The widest column that may still lose columns; column_count if there is none. */
static size_t widest_to_shorten(const struct table *table, const size_t *widths)
{
    size_t widest = table->column_count;
    for (size_t i = 0; i < table->column_count; i++) {
        if (widths[i] > least_of(&table->columns[i], widths[i], SHORTEST) &&
            (widest == table->column_count || widths[i] > widths[widest])) {
            widest = i;
        }
    }
    return widest;
}

/* The total once every column has shortened as far as is comfortable. */
static size_t comfortable_width(const struct table *table, const size_t *widths)
{
    size_t total = 0;
    for (size_t i = 0; i < table->column_count; i++) {
        size_t least = least_of(&table->columns[i], widths[i], COMFORTABLE);
        total += widths[i] > 0 ? least + (total > 0 ? GAP : 0) : 0;
    }
    return total;
}

/* Makes the widths fit; a column of width 0 is not shown. */
static void fit_widths(const struct table *table, size_t *widths, size_t room)
{
    size_t count = table->column_count;
    for (size_t i = count; i > 0 && comfortable_width(table, widths) > room; i--) {
        if (table->columns[i - 1].gives_way) {
            widths[i - 1] = 0;
        }
    }
    while (total_width(widths, count) > room) {
        size_t widest = widest_to_shorten(table, widths);
        if (widest == count) {
            break; /* nothing left to give: the terminal folds the lines */
        }
        widths[widest]--;
    }
}

static void print_spaces(FILE *stream, size_t count)
{
    if (count > 0) {
        (void)fprintf(stream, "%*s", (int)count, ""); /* errors stay on the stream */
    }
}

/* Prints one cell in `width` columns; spaces to its right only if something follows. */
static void print_cell(const struct screen *screen, const char *cell, size_t width, bool right,
                       enum screen_style style, bool last)
{
    FILE *stream = screen->stream;
    size_t length = strlen(cell);
    size_t columns = text_width(cell);
    const char *ellipsis = "";
    if (columns > width) {
        ellipsis = screen->unicode ? "\u2026" : "...";
        size_t kept = width - text_width(ellipsis);
        length = text_fit(cell, length, kept, &columns);
        columns += text_width(ellipsis);
    }
    if (right) {
        print_spaces(stream, width - columns);
    }
    if (length > 0) {
        (void)fprintf(stream, "%s%.*s%s%s", screen_begin(screen, style), (int)length, cell,
                      ellipsis, screen_end(screen, style));
    }
    if (!right && !last) {
        print_spaces(stream, width - columns);
    }
}

static bool is_last(const struct table *table, const size_t *widths, const char *const *row,
                    size_t column)
{
    for (size_t i = column + 1; i < table->column_count; i++) {
        if (widths[i] > 0 && *row[i]) {
            return false;
        }
    }
    return true;
}

static void print_row(const struct table *table, const struct screen *screen, const size_t *widths,
                      const char *const *row, bool heading)
{
    bool first = true;
    for (size_t i = 0; i < table->column_count; i++) {
        if (widths[i] == 0) {
            continue;
        }
        bool last = is_last(table, widths, row, i);
        if (!first) {
            print_spaces(screen->stream, GAP);
        }
        const struct table_column *column = &table->columns[i];
        print_cell(screen, row[i], widths[i], column->right,
                   heading ? SCREEN_HEADING : column->style, last);
        first = false;
        if (last) {
            break;
        }
    }
    (void)fputc('\n', screen->stream); /* errors stay on the stream */
}

int table_print(const struct table *table, const struct screen *screen)
{
    size_t count = table->column_count;
    size_t *widths = calloc(count, sizeof *widths);
    const char **headings = calloc(count, sizeof *headings);
    int result = -1;
    if (!widths || !headings) {
        goto out;
    }
    for (size_t i = 0; i < count; i++) {
        headings[i] = table->columns[i].heading;
    }
    natural_widths(table, widths);
    if (screen->width > 0) {
        fit_widths(table, widths, screen->width);
    }
    print_row(table, screen, widths, headings, true);
    for (size_t i = 0; i < table->row_count; i++) {
        print_row(table, screen, widths, (const char *const *)table->cells + i * count, false);
    }
    result = 0;
out:
    free(headings);
    free(widths);
    return result;
}
