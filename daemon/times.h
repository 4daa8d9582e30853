/*
 * times: RFC 3339 times in UTC, to the millisecond.
 */
#ifndef UNDERTAG_TIMES_H
#define UNDERTAG_TIMES_H

#include <stdbool.h>
#include <stdint.h>

enum {
    TIMES_BYTES = 32
};

/* Reads a date-time of RFC 3339, section 5.6, into milliseconds since 1970, UTC; what is finer is
 * dropped, a leap second is the second after it. False for anything else, and for what UTC has no
 * year of four digits for. */
bool times_parse(const char *text, int64_t *ret_ms);

/* Writes it as "1911-03-09T18:30:00Z", with milliseconds where there are any. Years 0 to 9999. */
void times_format(int64_t ms, char text[TIMES_BYTES]);

#endif
