#include "daemon/times.h"

#include <stdio.h>
#include <string.h>
#include <time.h>

/* What four digits can tell: 0000-01-01T00:00:00Z and the last millisecond of 9999. */
static const int64_t FIRST_MS = -62167219200000;
static const int64_t LAST_MS = 253402300799999;

/* Reads `digits` digits. */
static bool read_number(const char **text, int digits, int *ret_number)
{
    int number = 0;
    for (int i = 0; i < digits; i++) {
        char c = (*text)[i];
        if (c < '0' || c > '9') {
            return false;
        }
        number = number * 10 + (c - '0');
    }
    *text += digits;
    *ret_number = number;
    return true;
}

static bool skip(const char **text, char expected, char other)
{
    if (**text != expected && **text != other) {
        return false;
    }
    (*text)++;
    return true;
}

static int days_of_month(int year, int month)
{
    static const int DAYS[] = {31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31};
    bool is_leap = year % 4 == 0 && (year % 100 != 0 || year % 400 == 0);
    return DAYS[month - 1] + (month == 2 && is_leap);
}

static bool read_date(const char **text, struct tm *at)
{
    int year = 0;
    int month = 0;
    if (!read_number(text, 4, &year) || !skip(text, '-', '-') || !read_number(text, 2, &month) ||
        !skip(text, '-', '-') || !read_number(text, 2, &at->tm_mday) || month < 1 || month > 12 ||
        at->tm_mday < 1 || at->tm_mday > days_of_month(year, month)) {
        return false;
    }
    at->tm_year = year - 1900;
    at->tm_mon = month - 1;
    return true;
}

static bool read_clock(const char **text, struct tm *at, int *ret_ms)
{
    if (!read_number(text, 2, &at->tm_hour) || !skip(text, ':', ':') ||
        !read_number(text, 2, &at->tm_min) || !skip(text, ':', ':') ||
        !read_number(text, 2, &at->tm_sec) || at->tm_hour > 23 || at->tm_min > 59 ||
        at->tm_sec > 60) {
        return false;
    }
    int ms = 0;
    if (skip(text, '.', '.')) {
        size_t digits = strspn(*text, "0123456789");
        for (size_t i = 0; i < 3; i++) {
            ms = ms * 10 + (i < digits ? (*text)[i] - '0' : 0);
        }
        *text += digits;
        if (digits == 0) {
            return false;
        }
    }
    *ret_ms = ms;
    return true;
}

static bool read_offset(const char **text, int *ret_minutes)
{
    if (skip(text, 'Z', 'z')) {
        *ret_minutes = 0;
        return true;
    }
    int sign = **text == '-' ? -1 : 1;
    int hours = 0;
    int minutes = 0;
    if (!skip(text, '+', '-') || !read_number(text, 2, &hours) || !skip(text, ':', ':') ||
        !read_number(text, 2, &minutes) || hours > 23 || minutes > 59) {
        return false;
    }
    *ret_minutes = sign * (hours * 60 + minutes);
    return true;
}

bool times_parse(const char *text, int64_t *ret_ms)
{
    struct tm at = {0};
    int ms = 0;
    int offset_minutes = 0;
    if (!read_date(&text, &at) || !skip(&text, 'T', 't') || !read_clock(&text, &at, &ms) ||
        !read_offset(&text, &offset_minutes) || *text != '\0') {
        return false;
    }
    int64_t seconds = (int64_t)timegm(&at) - (int64_t)offset_minutes * 60;
    int64_t found = seconds * 1000 + ms;
    if (found < FIRST_MS || found > LAST_MS) {
        return false; /* its offset takes it out of the years that can be written */
    }
    *ret_ms = found;
    return true;
}

void times_format(int64_t ms, char text[TIMES_BYTES])
{
    int64_t rest = ((ms % 1000) + 1000) % 1000;
    time_t seconds = (time_t)((ms - rest) / 1000);
    struct tm at = {0};
    text[0] = '\0';
    if (!gmtime_r(&seconds, &at)) {
        return;
    }
    /* glibc's %Y has no leading zeros. */
    int year = snprintf(text, TIMES_BYTES, "%04d", at.tm_year + 1900);
    size_t used = year > 0 ? (size_t)year : 0;
    used += strftime(text + used, TIMES_BYTES - used, "-%m-%dT%H:%M:%S", &at);
    if (rest > 0) {
        (void)snprintf(text + used, TIMES_BYTES - used, ".%03dZ", (int)rest);
    } else {
        (void)snprintf(text + used, TIMES_BYTES - used, "Z");
    }
}
