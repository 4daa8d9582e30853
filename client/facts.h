/*
 * facts: names and what they are, one below the other, the values wrapped beside the names.
 */
#ifndef UNDERTAG_CLIENT_FACTS_H
#define UNDERTAG_CLIENT_FACTS_H

#include <stddef.h>

#include "client/screen.h"

enum {
    FACTS_NAME_COLUMNS = 14 /* what most lists of facts take for their names */
};

/*
 * Prints `name` in `name_columns` columns and the value, cleaned and wrapped to the screen, beside
 * it; an empty name continues the fact above. -1: no memory. Write errors are left on the stream
 * for the caller.
 */
int facts_print(const struct screen *screen, size_t name_columns, const char *name,
                const char *value) __attribute__((warn_unused_result));

/* The same with a value formatted as by printf, of at most 511 bytes. */
int facts_printf(const struct screen *screen, size_t name_columns, const char *name,
                 const char *format, ...) __attribute__((format(printf, 4, 5), warn_unused_result));

/* Prints running text, cleaned and wrapped, every line behind `indent` spaces. -1: no memory. */
int facts_text(const struct screen *screen, const char *text, size_t indent)
    __attribute__((warn_unused_result));

#endif
