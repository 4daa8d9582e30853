/*
 * snapshot_manifest: manifest.json: what a snapshot is of, and which files it has, with their
 * sums. It is written last, so a folder without it is no snapshot.
 */
#ifndef UNDERTAG_SNAPSHOT_MANIFEST_H
#define UNDERTAG_SNAPSHOT_MANIFEST_H

#include <stdbool.h>

#include "daemon/learner/propensity_fit.h"
#include "daemon/options.h"
#include "daemon/snapshot/snapshot_file.h"

enum {
    SNAPSHOT_FORMAT = 1 /* of the whole folder */
};

#define SNAPSHOT_MANIFEST "manifest.json"

struct snapshot_counts {
    uint64_t items;
    uint64_t tags;
    uint64_t words;
    uint64_t weights;
};

struct snapshot_manifest {
    const char *name;
    bool is_named; /* by somebody: the retention rule leaves it alone */
    uint64_t seq;
    int64_t at_ms;
    struct snapshot_counts counts;
    const struct options *learning;
    const struct propensity_fit *fit;
};

/* Sums up the files that are in the part, and writes the manifest of them. *ret_bytes: what all
 * take, the manifest too. */
int snapshot_manifest_write(struct export_part *part, const struct snapshot_manifest *manifest,
                            struct pace *pace, uint64_t *ret_bytes, struct store_error *error)
    __attribute__((warn_unused_result));

/* What a manifest says of its snapshot. */
struct snapshot_found {
    char name[EXPORT_NAME_BYTES];
    bool is_named;
    bool is_latest; /* EXPORT_LATEST leads to it; not of the manifest but of snapshot_list */
    uint64_t seq;
    uint64_t bytes;
    int64_t at_ms;
};

/* Reads a manifest that is open for reading. Returns 0 or -EINVAL for what is none of this format.
 */
int snapshot_manifest_read(FILE *stream, struct snapshot_found *ret_found)
    __attribute__((warn_unused_result));

#endif
