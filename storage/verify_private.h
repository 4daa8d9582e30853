/*
 * verify_private: how verify_store and verify_model tell of what they find.
 */
#ifndef UNDERTAG_VERIFY_PRIVATE_H
#define UNDERTAG_VERIFY_PRIVATE_H

#include <stdarg.h>
#include <stdio.h>

#include "storage/kv.h"
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

struct verify_pages {
    const struct verify_sink *sink;
    uint64_t *faults;
};

static inline void verify_tell_of_pages(void *user, const char *sentence)
{
    const struct verify_pages *pages = user;
    verify_tell(pages->sink, pages->faults, "%s", sentence);
}

/* Comes first: what stands in damaged pages says nothing, and reading it may end the process. */
static inline int verify_pages(struct kv *kv, const struct verify_sink *sink, uint64_t *faults,
                               struct store_error *error)
{
    struct verify_pages pages = {.sink = sink, .faults = faults};
    return kv_check_pages(kv, verify_tell_of_pages, &pages, error);
}

#endif
