/*
 * table: rows under a heading line that fit the width of the terminal.
 *
 * Columns are as wide as their widest cell. Where that is too wide, the widest of those marked
 * `shortens` lose columns, and their cells end in an ellipsis at a character's edge; columns marked
 * `gives_way` are left out, the last one first, where the others would become uncomfortably short.
 * Headings are never cut. Cells are cleaned (see text.h).
 */
#ifndef UNDERTAG_CLIENT_TABLE_H
#define UNDERTAG_CLIENT_TABLE_H

#include <stdbool.h>
#include <stddef.h>

#include "client/screen.h"

struct table_column {
    const char *heading; /* "" for none */
    bool right;          /* figures stand to the right */
    bool shortens;
    bool gives_way;
    enum screen_style style;
};

struct table;

/* A table without rows; the columns are borrowed until table_free. NULL: no memory. */
struct table *table_new(const struct table_column *columns, size_t column_count);
void table_free(struct table *table); /* NULL is passed over */

/* Adds a row; the cells (column_count of them, NULL for empty) are copied. -1: no memory. */
int table_add(struct table *table, const char *const *cells) __attribute__((warn_unused_result));

size_t table_rows(const struct table *table);

/* Prints heading and rows. -1: no memory. Write errors are left on the stream for the caller. */
int table_print(const struct table *table, const struct screen *screen)
    __attribute__((warn_unused_result));

#endif
