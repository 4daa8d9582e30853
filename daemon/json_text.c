#include "daemon/json_text.h"

#include <assert.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/grow.h"

enum {
    FIGURE_BYTES = 40,
    PLACES = 12
};

/* What is written with a point: its parts of 10^-12 are a whole number that a double still tells
 * apart from its neighbours. */
static const double LEAST_PLAIN = 1e-4;
static const double MOST_PLAIN = 1e3;
static const uint64_t UNIT = 1000000000000; /* 10^PLACES */

static void put(struct json_text *text, const char *bytes, size_t count)
{
    if (count == 0) {
        return; /* there may be no array yet */
    }
    if (text->failed || GROW(&text->bytes, &text->capacity, text->used + count) < 0) {
        text->failed = true;
        return;
    }
    memcpy(text->bytes + text->used, bytes, count);
    text->used += count;
}

void json_text_plain(struct json_text *text, const char *json)
{
    put(text, json, strlen(json));
}

/* --- strings ------------------------------------------------------------------------------------
 */

static void put_escaped(struct json_text *text, unsigned char c)
{
    char escape[8];
    int length = c == '"' || c == '\\' ? snprintf(escape, sizeof escape, "\\%c", c)
                                       : snprintf(escape, sizeof escape, "\\u%04x", c);
    put(text, escape, (size_t)length);
}

void json_text_string(struct json_text *text, const char *string, size_t bytes)
{
    size_t begun = 0;
    put(text, "\"", 1);
    for (size_t i = 0; i < bytes; i++) {
        unsigned char c = (unsigned char)string[i];
        if (c < 0x20 || c == '"' || c == '\\') {
            put(text, string + begun, i - begun);
            put_escaped(text, c);
            begun = i + 1;
        }
    }
    put(text, string + begun, bytes - begun);
    put(text, "\"", 1);
}

/* --- numbers ------------------------------------------------------------------------------------
 */

/* Writes the figures of a number up to `end`, at least so many; returns where they begin. */
static char *figures_up_to(char *end, uint64_t number, int least)
{
    for (; number > 0 || least > 0; number /= 10, least--) {
        *--end = (char)('0' + number % 10);
    }
    return end;
}

static void put_with_point(struct json_text *text, double value)
{
    char figures[FIGURE_BYTES];
    uint64_t parts = (uint64_t)(fabs(value) * (double)UNIT);
    char *end = figures + sizeof figures;
    char *begin = figures_up_to(end, parts % UNIT, PLACES);
    while (end - begin > 1 && end[-1] == '0') {
        end--;
    }
    *--begin = '.';
    begin = figures_up_to(begin, parts / UNIT, 1);
    if (value < 0.0) {
        *--begin = '-';
    }
    put(text, begin, (size_t)(end - begin));
}

void json_text_real(struct json_text *text, double value)
{
    char figures[FIGURE_BYTES];
    assert(isfinite(value));
    if (fabs(value) >= LEAST_PLAIN && fabs(value) < MOST_PLAIN) {
        put_with_point(text, value);
        return;
    }
    int length = snprintf(figures, sizeof figures, "%.17g", value);
    put(text, figures, (size_t)length);
    if (!memchr(figures, '.', (size_t)length) && !memchr(figures, 'e', (size_t)length)) {
        put(text, ".0", 2);
    }
}

void json_text_whole(struct json_text *text, uint64_t value)
{
    char figures[FIGURE_BYTES];
    char *end = figures + sizeof figures;
    const char *begin = figures_up_to(end, value, 1);
    put(text, begin, (size_t)(end - begin));
}

/* --- the end ------------------------------------------------------------------------------------
 */

char *json_text_take(struct json_text *text)
{
    put(text, "", 1);
    char *bytes = text->bytes;
    if (text->failed) {
        free(bytes);
        bytes = NULL;
    }
    *text = (struct json_text){0};
    return bytes;
}
