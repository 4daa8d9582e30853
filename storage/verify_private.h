/*
 * verify_private: how verify_store and verify_model tell of what they find.
 */
#ifndef UNDERTAG_VERIFY_PRIVATE_H
#define UNDERTAG_VERIFY_PRIVATE_H

#include <stdarg.h>
#include <stdio.h>

#include "storage/verify.h"

static inline __attribute__((format(printf, 3, 4))) void
verify_tell(const struct verify_sink *sink, uint64_t *faults, const char *format, ...)
{
    char sentence[STORE_ERROR_BYTES];
    va_list arguments;
    va_start(arguments, format);
    (void)vsnprintf(sentence, sizeof sentence, format, arguments); /* may be cut off */
    va_end(arguments);
    (*faults)++;
    sink->fault(sink->user, sentence);
}

/* Whether reading failed for damage, and not for want of memory, say. */
static inline bool verify_is_fault(int code)
{
    return code == STORE_CORRUPT || code == STORE_NOT_FOUND;
}

#endif
