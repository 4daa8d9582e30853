#include "daemon/fault.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>
#include <unistr.h>

/* Drops the bytes of a character that a cut has left unfinished at the end of the text. */
static void drop_cut_character(char *text)
{
    size_t length = strlen(text);
    size_t start = length;
    while (start > 0 && ((unsigned char)text[start - 1] & 0xC0U) == 0x80U) {
        start--;
    }
    if (start == 0) {
        return;
    }
    unsigned char lead = (unsigned char)text[start - 1];
    size_t due = lead >= 0xF0U ? 4 : lead >= 0xE0U ? 3 : lead >= 0xC0U ? 2 : 1;
    if (length - (start - 1) < due) {
        text[start - 1] = '\0';
    }
}

/* What a request quotes may have been cut inside a character, or never was one. */
static void make_valid(char *text, int written, size_t size)
{
    if (written < 0 || (size_t)written >= size) {
        drop_cut_character(text);
    }
    const uint8_t *bad = NULL;
    while ((bad = u8_check((const uint8_t *)text, strlen(text)))) {
        text[bad - (const uint8_t *)text] = '?';
    }
}

/* A sentence is one line, and says nothing to a terminal but itself. The characters are those of
 * Unicode's general category Cc. */
static void hide_controls(char *text)
{
    for (unsigned char *at = (unsigned char *)text; *at != '\0'; at++) {
        if (*at < 0x20 || *at == 0x7F) {
            *at = '?';
        } else if (*at == 0xC2 && at[1] >= 0x80 && at[1] < 0xA0) {
            *at = '?';
            at[1] = '?';
        }
    }
}

int fault_set(struct fault *fault, enum fault_code code, const char *field, const char *format, ...)
{
    if (fault->code != 0) {
        return fault->code;
    }
    fault->code = code;
    int written = snprintf(fault->field, sizeof fault->field, "%s", field ? field : "");
    make_valid(fault->field, written, sizeof fault->field);
    va_list arguments;
    va_start(arguments, format);
    written = vsnprintf(fault->message, sizeof fault->message, format, arguments);
    va_end(arguments);
    make_valid(fault->message, written, sizeof fault->message);
    hide_controls(fault->message);
    return fault->code;
}
