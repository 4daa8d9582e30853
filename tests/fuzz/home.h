/*
 * home: a home in a temporary folder, for the targets that need a store. What cannot be made ends
 * the program: that is no finding.
 */
#ifndef UNDERTAG_TESTS_FUZZ_HOME_H
#define UNDERTAG_TESTS_FUZZ_HOME_H

#include <ftw.h>
#include <unistd.h>

#include "tests/fuzz/fuzz.h"

enum {
    HOME_BYTES = 256,
    HOME_MAP_BYTES = 256 << 20
};

/* Ends the program where something that is no property fails. */
#define FUZZ_NEED(done, reason)                                                                    \
    do {                                                                                           \
        if (!(done)) {                                                                             \
            (void)fprintf(stderr, "%s:%d: the target cannot go on: %s\n", __FILE__, __LINE__,      \
                          reason);                                                                 \
            exit(1);                                                                               \
        }                                                                                          \
    } while (0)

static inline void home_make(char home[HOME_BYTES])
{
    const char *parent = getenv("TMPDIR");
    (void)snprintf(home, HOME_BYTES, "%s/undertag-fuzz-XXXXXX", parent ? parent : "/tmp");
    FUZZ_NEED(mkdtemp(home), home);
}

static inline int home_remove_entry(const char *path, const struct stat *status, int kind,
                                    struct FTW *place)
{
    (void)status;
    (void)kind;
    (void)place;
    return remove(path);
}

static inline void home_remove(const char *home)
{
    FUZZ_NEED(nftw(home, home_remove_entry, 8, FTW_DEPTH | FTW_PHYS) == 0, home);
}

#endif
