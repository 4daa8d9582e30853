/*
 * snapshot_writer: a moment of store and model as a folder of files in open formats
 * (storage/SNAPSHOT.md), member by member.
 */
#ifndef UNDERTAG_SNAPSHOT_WRITER_H
#define UNDERTAG_SNAPSHOT_WRITER_H

#include "daemon/export_folder.h"
#include "daemon/moment.h"
#include "daemon/pace.h"

/* What is wanted of it. */
struct snapshot_wanted {
    char name[EXPORT_NAME_BYTES]; /* "": one made of the time and the last change */
    bool is_named;           /* somebody gave it its name: the retention rule leaves it alone */
    bool items;              /* items.jsonl, too: texts and all */
    bool proposals;          /* proposals.jsonl, too */
    double floor;            /* of proposals: the least chance */
    uint64_t bytes_a_second; /* 0: as fast as it goes */
};

struct snapshot_written {
    char name[EXPORT_NAME_BYTES];
    uint64_t seq;
    uint64_t bytes; /* of all files */
    int64_t at_ms;
};

/* All borrowed. */
struct snapshot_task {
    const struct snapshot_wanted *wanted;
    struct export_folder *folder;
    struct moment *moment; /* its views are left as soon as they are not needed */
    struct pace *pace;
    int64_t at_ms; /* what time it is */
};

/*
 * Writes it and gives it its name. STORE_FULL where there is no room, STORE_STOPPED where the pace
 * was stopped: nothing is left of it then.
 */
int snapshot_write(const struct snapshot_task *task, struct snapshot_written *ret_written,
                   struct store_error *error) __attribute__((warn_unused_result));

#endif
