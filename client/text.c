#include "client/text.h"

#include <stdlib.h>
#include <string.h>
#include <utf8proc.h>

static const char REPLACEMENT[] = "\xEF\xBF\xBD"; /* U+FFFD */

/* Decodes one character; bytes that are not UTF-8 give -1 and one byte. */
static size_t decode(const char *text, size_t length, utf8proc_int32_t *ret_character)
{
    utf8proc_int32_t character = -1;
    utf8proc_ssize_t bytes =
        utf8proc_iterate((const utf8proc_uint8_t *)text, (utf8proc_ssize_t)length, &character);
    if (bytes <= 0) {
        *ret_character = -1;
        return 1;
    }
    *ret_character = character;
    return (size_t)bytes;
}

static bool turns_direction(utf8proc_int32_t character)
{
    return (character >= 0x202A && character <= 0x202E) ||
           (character >= 0x2066 && character <= 0x2069);
}

/* What a character is shown as: NULL where it may be shown as it is. */
static const char *shown_as(utf8proc_int32_t character, enum text_lines lines)
{
    if (character == '\n' || character == 0x2028 || character == 0x2029) {
        return lines == TEXT_KEEP_LINES ? "\n" : " ";
    }
    if (character == '\t') {
        return " ";
    }
    if (character < 0x20 || (character >= 0x7F && character <= 0x9F) ||
        turns_direction(character)) {
        return REPLACEMENT;
    }
    return NULL;
}

char *text_clean(const char *text, enum text_lines lines)
{
    size_t length = strlen(text);
    if (length > (SIZE_MAX - 1) / 3) {
        return NULL;
    }
    char *clean = malloc(3 * length + 1); /* one bad byte may become the three of U+FFFD */
    if (!clean) {
        return NULL;
    }
    size_t used = 0;
    for (size_t at = 0; at < length;) {
        utf8proc_int32_t character = 0;
        size_t bytes = decode(text + at, length - at, &character);
        if (character == '\r' && text[at + 1] == '\n') {
            at += bytes; /* the line end that follows stands for both */
            continue;
        }
        const char *shown = shown_as(character, lines);
        size_t shown_bytes = shown ? strlen(shown) : bytes;
        memcpy(clean + used, shown ? shown : text + at, shown_bytes);
        used += shown_bytes;
        at += bytes;
    }
    clean[used] = '\0';
    return clean;
}

static size_t character_columns(utf8proc_int32_t character)
{
    int columns = character < 0 ? 1 : utf8proc_charwidth(character);
    return columns > 0 ? (size_t)columns : 0;
}

size_t text_width(const char *text)
{
    size_t columns = 0;
    (void)text_fit(text, strlen(text), SIZE_MAX, &columns); /* all of it fits */
    return columns;
}

size_t text_fit(const char *text, size_t length, size_t columns, size_t *ret_columns)
{
    size_t edge = 0; /* the last edge that fits, and the columns up to it */
    size_t edge_columns = 0;
    size_t used = 0; /* columns up to `at` */
    utf8proc_int32_t before = 0;
    utf8proc_int32_t state = 0;
    size_t at = 0;
    while (at < length) {
        utf8proc_int32_t character = 0;
        size_t bytes = decode(text + at, length - at, &character);
        utf8proc_int32_t breakable = character < 0 ? 0xFFFD : character;
        if (at > 0 && utf8proc_grapheme_break_stateful(before, breakable, &state)) {
            edge = at;
            edge_columns = used;
        }
        size_t wide = character_columns(character);
        if (wide > columns - used) {
            break;
        }
        used += wide;
        before = breakable;
        at += bytes;
    }
    if (at >= length) {
        edge = length;
        edge_columns = used;
    }
    if (ret_columns) {
        *ret_columns = edge_columns;
    }
    return edge;
}

/* Bytes of the first character as a reader sees it, however wide: so that a line never stands
 * still. */
static size_t first_cluster(const char *text, size_t length)
{
    utf8proc_int32_t before = 0;
    utf8proc_int32_t state = 0;
    size_t at = 0;
    while (at < length) {
        utf8proc_int32_t character = 0;
        size_t bytes = decode(text + at, length - at, &character);
        utf8proc_int32_t breakable = character < 0 ? 0xFFFD : character;
        if (at > 0 && utf8proc_grapheme_break_stateful(before, breakable, &state)) {
            break;
        }
        before = breakable;
        at += bytes;
    }
    return at;
}

size_t text_line(const char *text, size_t columns, size_t *ret_next)
{
    size_t line = strcspn(text, "\n");
    size_t next = line + (text[line] == '\n' ? 1 : 0);
    if (columns > 0) {
        size_t fits = text_fit(text, line, columns, NULL);
        if (fits < line) {
            size_t cut = fits;
            while (cut > 0 && text[cut] != ' ') {
                cut--;
            }
            if (cut == 0) { /* one word longer than the line */
                cut = fits > 0 ? fits : first_cluster(text, line);
            }
            next = cut + strspn(text + cut, " ");
            next += next == line && text[line] == '\n' ? 1 : 0;
            line = cut;
        }
    }
    while (line > 0 && text[line - 1] == ' ') {
        line--;
    }
    *ret_next = next;
    return line;
}

bool text_is_utf8(const char *text, size_t length, size_t *ret_at)
{
    for (size_t at = 0; at < length;) {
        utf8proc_int32_t character = 0;
        size_t bytes = decode(text + at, length - at, &character);
        if (character < 0) {
            *ret_at = at;
            return false;
        }
        at += bytes;
    }
    return true;
}
