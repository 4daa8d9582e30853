/*
 * Values of options: text into memory and back, by the type that the table gives them.
 */
#include "daemon/options_private.h"

#include <errno.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistr.h>

#include "daemon/text/words.h"

const char *const OPTION_LOSSES[] = {[SURROGATE_SQUARED_HINGE] = "squared_hinge",
                                     [SURROGATE_HINGE] = "hinge",
                                     [SURROGATE_LOGISTIC] = "logistic",
                                     NULL};

/* --- text into values --------------------------------------------------------------------------
 */

static int refuse_peers(char *error, const struct option *option, const char *value)
{
    struct rights_list list;
    char reason[ACCOUNTS_REASON_BYTES] = "";
    if (accounts_read(value, &list, reason) == 0) { /* once more, for its reason */
        (void)snprintf(reason, sizeof reason, "it could not be read a moment ago");
    }
    return snprintf(error, OPTIONS_ERROR_BYTES,
                    "option %s is a list of users and @groups, such as 'editor @harbour @socket': "
                    "%s",
                    option->name, reason);
}

static int refuse(char *error, const struct option *option, const char *value)
{
    switch (option->type) {
    case TYPE_SWITCH:
        return snprintf(error, OPTIONS_ERROR_BYTES, "option %s is on or off, not '%s'",
                        option->name, value);
    case TYPE_CHOICE: {
        int used = snprintf(error, OPTIONS_ERROR_BYTES, "option %s is one of", option->name);
        for (size_t i = 0; option->choices[i] && used > 0 && used < OPTIONS_ERROR_BYTES; i++) {
            used += snprintf(error + used, OPTIONS_ERROR_BYTES - (size_t)used, "%s %s",
                             i ? "," : "", option->choices[i]);
        }
        if (used > 0 && used < OPTIONS_ERROR_BYTES) {
            used += snprintf(error + used, OPTIONS_ERROR_BYTES - (size_t)used, "; not '%s'", value);
        }
        return used;
    }
    case TYPE_LANGUAGE:
        return snprintf(error, OPTIONS_ERROR_BYTES,
                        "option %s is empty or a code such as en that Snowball knows, not '%s'",
                        option->name, value);
    case TYPE_BYTES:
        return snprintf(error, OPTIONS_ERROR_BYTES,
                        "option %s is a size from %.0f to %.0f bytes, such as 64MiB, not '%s'",
                        option->name, option->minimum, option->maximum, value);
    case TYPE_WHOLE:
        return snprintf(error, OPTIONS_ERROR_BYTES,
                        "option %s is a whole number from %.0f to %.0f, not '%s'", option->name,
                        option->minimum, option->maximum, value);
    case TYPE_PEERS:
        return refuse_peers(error, option, value);
    case TYPE_PATH:
        return snprintf(error, OPTIONS_ERROR_BYTES,
                        "option %s is a path of 1 to %d bytes of UTF-8, without control "
                        "characters, blanks at its ends or a remark (' ;'), not '%s'",
                        option->name, OPTIONS_PATH_BYTES - 1, value);
    case TYPE_NUMBER:
        break;
    }
    return snprintf(error, OPTIONS_ERROR_BYTES, "option %s is a number from %g to %g, not '%s'",
                    option->name, option->minimum, option->maximum, value);
}

/* A number with nothing but digits, one point, a sign and an exponent; no hex, no "inf". */
static bool parse_number(const char *text, const char **ret_end, double *ret_number)
{
    if (strspn(text, "+-.0123456789") == 0) {
        return false;
    }
    char *end = NULL;
    errno = 0;
    double number = strtod(text, &end); /* the daemon never leaves the "C" locale */
    bool has_hex =
        memchr(text, 'x', (size_t)(end - text)) || memchr(text, 'X', (size_t)(end - text));
    if (end == text || errno != 0 || !isfinite(number) || has_hex) {
        return false;
    }
    *ret_end = end;
    *ret_number = number + 0.0; /* minus zero becomes zero */
    return true;
}

static bool parse_bytes(const char *text, double *ret_number)
{
    static const struct {
        const char *suffix;
        double factor;
    } units[] = {{"", 1.0}, {"KiB", KIB}, {"MiB", MIB}, {"GiB", GIB}};
    const char *end = NULL;
    double number = 0.0;
    if (!parse_number(text, &end, &number)) {
        return false;
    }
    while (*end == ' ') {
        end++;
    }
    for (size_t i = 0; i < sizeof units / sizeof units[0]; i++) {
        if (strcmp(end, units[i].suffix) == 0) {
            *ret_number = number * units[i].factor;
            return true;
        }
    }
    return false;
}

static bool set_amount(const struct option *option, void *member, const char *value)
{
    double number = 0.0;
    const char *end = "";
    bool parsed = option->type == TYPE_BYTES ? parse_bytes(value, &number)
                                             : parse_number(value, &end, &number) && *end == '\0';
    if (!parsed || number < option->minimum || number > option->maximum) {
        return false;
    }
    if (option->type == TYPE_NUMBER) {
        memcpy(member, &number, sizeof number);
        return true;
    }
    if (number != floor(number)) {
        return false;
    }
    uint64_t whole = (uint64_t)number;
    memcpy(member, &whole, sizeof whole);
    return true;
}

static bool set_choice(const struct option *option, void *member, const char *value)
{
    for (int i = 0; option->choices[i]; i++) {
        if (strcmp(value, option->choices[i]) != 0) {
            continue;
        }
        if (option->choices == OPTION_LOSSES) {
            *(enum surrogate *)member = (enum surrogate)i;
        } else {
            *(bool *)member = i != 0;
        }
        return true;
    }
    return false;
}

static bool set_language(char *member, const char *value)
{
    if (strlen(value) >= OPTIONS_LANGUAGE_BYTES ||
        (value[0] != '\0' && !words_stems_language(value))) {
        return false;
    }
    memset(member, 0, OPTIONS_LANGUAGE_BYTES);
    (void)snprintf(member, OPTIONS_LANGUAGE_BYTES, "%s", value); /* it fits */
    return true;
}

/* A file of options could not say it: blanks at its ends, and what may be a remark there. */
static bool is_for_a_file(const char *value)
{
    size_t bytes = strlen(value);
    return value[0] != ' ' && value[0] != ';' && value[bytes - 1] != ' ' && !strstr(value, " ;");
}

/* A path goes into sentences and answers, so it is text. */
static bool set_path(char *member, const char *value)
{
    size_t bytes = strlen(value);
    if (bytes == 0 || bytes >= OPTIONS_PATH_BYTES || u8_check((const uint8_t *)value, bytes) ||
        !is_for_a_file(value)) {
        return false;
    }
    for (size_t i = 0; i < bytes; i++) {
        if ((unsigned char)value[i] < 0x20 || value[i] == 0x7F) {
            return false;
        }
    }
    memset(member, 0, OPTIONS_PATH_BYTES);
    (void)snprintf(member, OPTIONS_PATH_BYTES, "%s", value); /* it fits */
    return true;
}

static bool set_peers(struct rights_list *member, const char *value)
{
    char reason[ACCOUNTS_REASON_BYTES];
    return accounts_read(value, member, reason) == 0;
}

bool option_read(const struct option *option, void *member, const char *value)
{
    switch (option->type) {
    case TYPE_SWITCH:
    case TYPE_CHOICE:
        return set_choice(option, member, value);
    case TYPE_LANGUAGE:
        return set_language(member, value);
    case TYPE_PEERS:
        return set_peers(member, value);
    case TYPE_PATH:
        return set_path(member, value);
    case TYPE_WHOLE:
    case TYPE_BYTES:
    case TYPE_NUMBER:
        break;
    }
    return set_amount(option, member, value);
}

void option_refuse(const struct option *option, const char *value, char *error)
{
    (void)refuse(error, option, value); /* what is too long is cut */
}

/* --- values into text --------------------------------------------------------------------------
 */

void option_write(const struct option *option, const void *member, char *text, size_t size)
{
    uint64_t whole = 0;
    double number = 0.0;
    char peers[ACCOUNTS_TEXT_BYTES];
    switch (option->type) {
    case TYPE_WHOLE:
    case TYPE_BYTES:
        memcpy(&whole, member, sizeof whole);
        (void)snprintf(text, size, "%llu", (unsigned long long)whole);
        return;
    case TYPE_NUMBER:
        memcpy(&number, member, sizeof number);
        (void)snprintf(text, size, "%.17g", number);
        return;
    case TYPE_LANGUAGE:
    case TYPE_PATH:
        (void)snprintf(text, size, "%s", (const char *)member);
        return;
    case TYPE_PEERS:
        accounts_write(member, peers);
        (void)snprintf(text, size, "%s", peers);
        return;
    case TYPE_SWITCH:
    case TYPE_CHOICE:
        break;
    }
    int at = option->choices == OPTION_LOSSES ? (int)*(const enum surrogate *)member
                                              : (int)*(const bool *)member;
    (void)snprintf(text, size, "%s", option->choices[at]);
}

/* --- values in memory ---------------------------------------------------------------------------
 */

size_t option_bytes(const struct option *option)
{
    switch (option->type) {
    case TYPE_SWITCH:
        return sizeof(bool);
    case TYPE_CHOICE:
        return option->choices == OPTION_LOSSES ? sizeof(enum surrogate) : sizeof(bool);
    case TYPE_LANGUAGE:
        return OPTIONS_LANGUAGE_BYTES;
    case TYPE_PEERS:
        return sizeof(struct rights_list);
    case TYPE_PATH:
        return OPTIONS_PATH_BYTES;
    case TYPE_WHOLE:
    case TYPE_BYTES:
    case TYPE_NUMBER:
        break;
    }
    return sizeof(uint64_t);
}
