/*
 * html: a page that is put together in memory.
 *
 * Text from outside (tags, titles, ids) goes through html_text and nothing else. The first failure
 * stays with the page, so that only its end has to be looked at.
 */
#ifndef UNDERTAG_CLIENT_HTML_H
#define UNDERTAG_CLIENT_HTML_H

#include <stdbool.h>
#include <stddef.h>
#include <stdio.h>

struct html { /* all private */
    FILE *stream;
    char *page;
    size_t length;
    bool failed;
};

/* -1: no memory. */
int html_open(struct html *html) __attribute__((warn_unused_result));

/* Ends the page, which the caller frees. -1: no memory, here or before; then there is none. */
int html_close(struct html *html, char **ret_page, size_t *ret_length)
    __attribute__((warn_unused_result));

/* Our own markup, and figures. */
void html_put(struct html *html, const char *format, ...) __attribute__((format(printf, 2, 3)));

/* Text of any origin: cleaned (see text.h) and escaped, as content or as a quoted attribute. */
void html_text(struct html *html, const char *text);

#endif
