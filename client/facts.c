#include "client/facts.h"

#include <stdarg.h>
#include <stdbool.h>
#include <stdlib.h>

#include "client/text.h"

enum {
    NARROWEST = 16,    /* columns that a value gets however narrow the terminal is */
    VALUE_BYTES = 512, /* of a formatted value */
    READABLE = 100     /* running text is not set wider than this */
};

/* Columns for a value that stands behind `indent` columns; 0: no limit. */
static size_t value_columns(const struct screen *screen, size_t indent)
{
    if (screen->width == 0) {
        return 0;
    }
    return screen->width > indent + NARROWEST ? screen->width - indent : NARROWEST;
}

/* Prints clean text line by line; the first line stands where the cursor is. */
static void print_wrapped(const struct screen *screen, const char *text, size_t columns,
                          size_t indent, bool indent_first)
{
    FILE *stream = screen->stream;
    bool first = true;
    do {
        size_t next = 0;
        size_t length = text_line(text, columns, &next);
        if (length > 0) {
            (void)fprintf(stream, "%*s%.*s", first && !indent_first ? 0 : (int)indent, "",
                          (int)length, text); /* errors stay on the stream */
        }
        (void)fputc('\n', stream);
        text += next;
        first = false;
    } while (*text);
}

int facts_print(const struct screen *screen, size_t name_columns, const char *name,
                const char *value)
{
    char *clean = text_clean(value, TEXT_KEEP_LINES);
    if (!clean) {
        return -1;
    }
    size_t columns = text_width(name);
    size_t pad = columns < name_columns ? name_columns - columns : 1;
    if (*clean) {
        (void)fprintf(screen->stream, "%s%s%s%*s", screen_begin(screen, SCREEN_HEADING), name,
                      screen_end(screen, SCREEN_HEADING), (int)pad, "");
        print_wrapped(screen, clean, value_columns(screen, name_columns), name_columns, false);
    } else {
        (void)fprintf(screen->stream, "%s%s%s\n", screen_begin(screen, SCREEN_HEADING), name,
                      screen_end(screen, SCREEN_HEADING));
    }
    free(clean);
    return 0;
}

int facts_printf(const struct screen *screen, size_t name_columns, const char *name,
                 const char *format, ...)
{
    char value[VALUE_BYTES];
    va_list arguments;
    va_start(arguments, format);
    int written = vsnprintf(value, sizeof value, format, arguments);
    va_end(arguments);
    return written < 0 ? -1 : facts_print(screen, name_columns, name, value);
}

int facts_text(const struct screen *screen, const char *text, size_t indent)
{
    char *clean = text_clean(text, TEXT_KEEP_LINES);
    if (!clean) {
        return -1;
    }
    size_t columns = value_columns(screen, indent);
    print_wrapped(screen, clean, columns > READABLE ? READABLE : columns, indent, true);
    free(clean);
    return 0;
}
