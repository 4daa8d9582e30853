/*
 * format: figures as people read them, the same in every locale. Pure.
 */
#ifndef UNDERTAG_CLIENT_FORMAT_H
#define UNDERTAG_CLIENT_FORMAT_H

#include <stdint.h>

enum {
    FORMAT_BYTES = 32
};

/* Each writes to `out` (FORMAT_BYTES) and returns it. */
char *format_count(int64_t count, char *out);     /* 1234567 -> "1,234,567" */
char *format_size(double bytes, char *out);       /* 1234567 -> "1.2 MB" (powers of 1,000) */
char *format_duration(double seconds, char *out); /* 3725 -> "1 h 2 min" */
char *format_share(double share, char *out);      /* .8449 -> "0.84"; 0.004 -> "0.004" */

/* What is not known (not a number) is a dash in these. */
char *format_figure(double figure, char *out);            /* .71249 -> "0.712" */
char *format_amount(double amount, char *out);            /* 1234.5 -> "1,235"; 3.21 -> "3.2" */
char *format_about(double amount, char *out);             /* 92237 -> "92,000" */
char *format_between(double low, double high, char *out); /* "0.70 to 0.76" */
char *format_percent(double share, char *out);            /* .734 -> "73 %"; .0123 -> "1.2 %" */
char *format_change(double ratio, char *out);             /* .123 -> "+12.3 %" */

#endif
