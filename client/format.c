#include "client/format.h"

#include <math.h>
#include <stdbool.h>
#include <stdio.h>
#include <string.h>

char *format_count(int64_t count, char *out)
{
    char digits[FORMAT_BYTES];
    uint64_t size = count < 0 ? 0 - (uint64_t)count : (uint64_t)count;
    (void)snprintf(digits, sizeof digits, "%llu", (unsigned long long)size); /* 20 digits at most */
    size_t length = strlen(digits);
    char *end = out;
    if (count < 0) {
        *end++ = '-';
    }
    for (size_t i = 0; i < length; i++) {
        if (i > 0 && (length - i) % 3 == 0) {
            *end++ = ',';
        }
        *end++ = digits[i];
    }
    *end = '\0';
    return out;
}

char *format_size(double bytes, char *out)
{
    static const char *const UNITS[] = {"bytes", "kB", "MB", "GB", "TB", "PB"};
    double size = isfinite(bytes) && bytes > 0 ? bytes : 0;
    size_t unit = 0;
    while (size >= 999.95 && unit + 1 < sizeof UNITS / sizeof UNITS[0]) {
        size /= 1000;
        unit++;
    }
    (void)snprintf(out, FORMAT_BYTES, "%.*f %s", unit == 0 ? 0 : 1, size, UNITS[unit]);
    return out;
}

char *format_duration(double seconds, char *out)
{
    double most = 999.0 * 86400;
    double whole = isfinite(seconds) && seconds > 0 ? round(fmin(seconds, most)) : 0;
    unsigned long left = (unsigned long)whole;
    unsigned long days = left / 86400;
    unsigned long hours = left % 86400 / 3600;
    unsigned long minutes = left % 3600 / 60;
    if (days > 0) {
        (void)snprintf(out, FORMAT_BYTES, "%lu d %lu h", days, hours);
    } else if (hours > 0) {
        (void)snprintf(out, FORMAT_BYTES, "%lu h %lu min", hours, minutes);
    } else if (minutes > 0) {
        (void)snprintf(out, FORMAT_BYTES, "%lu min %lu s", minutes, left % 60);
    } else {
        (void)snprintf(out, FORMAT_BYTES, "%lu s", left);
    }
    return out;
}

char *format_share(double share, char *out)
{
    int digits = share > 0 && share < 0.00995 ? 3 : 2;
    (void)snprintf(out, FORMAT_BYTES, "%.*f", digits, share);
    return out;
}

static char *dash(char *out)
{
    (void)snprintf(out, FORMAT_BYTES, "-");
    return out;
}

char *format_figure(double figure, char *out)
{
    if (!isfinite(figure)) {
        return dash(out);
    }
    (void)snprintf(out, FORMAT_BYTES, "%.3f", figure);
    return out;
}

char *format_amount(double amount, char *out)
{
    if (!isfinite(amount) || fabs(amount) > 9e15) {
        return dash(out);
    }
    if (fabs(amount) < 9.95 && fabs(amount - round(amount)) > 1e-9) {
        (void)snprintf(out, FORMAT_BYTES, "%.1f", amount);
        return out;
    }
    return format_count((int64_t)llround(amount), out);
}

char *format_about(double amount, char *out)
{
    double unit = fabs(amount) >= 100 ? pow(10, floor(log10(fabs(amount))) - 1) : 1;
    return format_amount(isfinite(amount) ? round(amount / unit) * unit : amount, out);
}

char *format_between(double low, double high, char *out)
{
    char least[FORMAT_BYTES];
    char most[FORMAT_BYTES];
    if (!isfinite(low) || !isfinite(high)) {
        return dash(out);
    }
    (void)snprintf(out, FORMAT_BYTES, "%.12s to %.12s", format_share(low, least),
                   format_share(high, most));
    return out;
}

char *format_percent(double share, char *out)
{
    if (!isfinite(share)) {
        return dash(out);
    }
    bool fine = (share > 0 && share < 0.0995) || (share > 0.99 && share < 1);
    (void)snprintf(out, FORMAT_BYTES, "%.*f %%", fine ? 1 : 0, 100 * share);
    return out;
}

char *format_change(double ratio, char *out)
{
    if (!isfinite(ratio)) {
        return dash(out);
    }
    (void)snprintf(out, FORMAT_BYTES, "%+.*f %%", fabs(ratio) < 0.0995 ? 1 : 0, 100 * ratio);
    return out;
}
