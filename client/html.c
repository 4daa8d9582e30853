#include "client/html.h"

#include <stdarg.h>
#include <stdlib.h>

#include "client/text.h"

int html_open(struct html *html)
{
    *html = (struct html){0};
    html->stream = open_memstream(&html->page, &html->length);
    return html->stream ? 0 : -1;
}

int html_close(struct html *html, char **ret_page, size_t *ret_length)
{
    bool failed = html->failed || ferror(html->stream);
    failed = fclose(html->stream) || failed;
    html->stream = NULL;
    if (failed || !html->page) { /* fclose does not tell when its last realloc finds no memory */
        free(html->page);
        html->page = NULL;
        return -1;
    }
    *ret_page = html->page;
    *ret_length = html->length;
    return 0;
}

void html_put(struct html *html, const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    if (vfprintf(html->stream, format, arguments) < 0) {
        html->failed = true;
    }
    va_end(arguments);
}

static const char *escaped(char c)
{
    switch (c) {
    case '&':
        return "&amp;";
    case '<':
        return "&lt;";
    case '>':
        return "&gt;";
    case '"':
        return "&quot;";
    case '\'':
        return "&#39;";
    default:
        return NULL;
    }
}

void html_text(struct html *html, const char *text)
{
    char *clean = text_clean(text, TEXT_ONE_LINE);
    if (!clean) {
        html->failed = true;
        return;
    }
    for (const char *c = clean; *c; c++) {
        const char *instead = escaped(*c);
        int result = instead ? fputs(instead, html->stream) : fputc(*c, html->stream);
        html->failed = html->failed || result < 0;
    }
    free(clean);
}
