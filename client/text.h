/*
 * text: UTF-8 as a terminal shows it: its width in columns, where it may be cut, and what of it may
 * be shown at all.
 *
 * Everything that did not come from this program (stored text, file names, sentences of the daemon)
 * goes through text_clean before it is shown. Pure; any thread.
 */
#ifndef UNDERTAG_CLIENT_TEXT_H
#define UNDERTAG_CLIENT_TEXT_H

#include <stdbool.h>
#include <stddef.h>

enum text_lines {
    TEXT_ONE_LINE,  /* line ends and tabs become spaces */
    TEXT_KEEP_LINES /* line ends stay, tabs become spaces */
};

/*
 * A copy that is safe to show: control characters, characters that turn the direction of writing,
 * and bytes that are not UTF-8 become U+FFFD. NULL: no memory. The caller frees it.
 */
char *text_clean(const char *text, enum text_lines lines);

/* Columns that clean text takes (wide characters take two, combining ones none). */
size_t text_width(const char *text);

/*
 * Bytes of the longest beginning of `length` bytes of clean text that takes at most `columns`
 * columns and ends where a character as a reader sees it (a grapheme cluster, UAX #29) ends.
 * *ret_columns (may be NULL) are the columns that it takes.
 */
size_t text_fit(const char *text, size_t length, size_t columns, size_t *ret_columns);

/*
 * The next line of clean text when it is set in `columns` columns (at least 1): returns its bytes,
 * and in *ret_next the bytes to pass over to the beginning of the line after it. Words stay whole
 * unless one is longer than a line; a line end in the text ends the line. `columns` 0: no limit.
 */
size_t text_line(const char *text, size_t columns, size_t *ret_next);

/* True when all `length` bytes are UTF-8; otherwise *ret_at is the offset of the first bad byte. */
bool text_is_utf8(const char *text, size_t length, size_t *ret_at);

#endif
