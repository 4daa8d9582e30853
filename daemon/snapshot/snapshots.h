/*
 * snapshots: has snapshots written, one at a time, on a thread of its own: when somebody asks, at a
 * signal, and by the schedule of the options; removes old ones; and knows how far it is.
 */
#ifndef UNDERTAG_SNAPSHOTS_H
#define UNDERTAG_SNAPSHOTS_H

#include "daemon/engine.h"
#include "daemon/snapshot/snapshot_list.h"
#include "daemon/snapshot/snapshot_writer.h"

struct snapshots;

/* Both borrowed for its life. */
struct snapshots_settings {
    struct engine *engine;
    const char *folder; /* of the exports; made when the first one is written */
};

/* Looks up when the last one was made, for the schedule. Returns 0 or a negative errno. */
int snapshots_new(const struct snapshots_settings *settings, struct snapshots **ret_snapshots)
    __attribute__((warn_unused_result));

/* None is begun any more, and what is under way is given up. Any thread. */
void snapshots_stop(struct snapshots *snapshots);

/* After snapshots_stop: waits for the thread; before the engine is closed. NULL is passed over. */
void snapshots_free(struct snapshots *snapshots);

/* What the options say of those that nobody asked for in detail. */
struct snapshot_wanted snapshots_wanted(const struct options *options);

/*
 * Begins one, and, if `waits`, waits for its end and fills *ret_written, which may be NULL
 * otherwise. Not the loop's thread if it waits. Afterwards old ones are removed until
 * `keep` are left. Returns STORE_OK; STORE_REFUSED where one is being written already, with
 * *ret_is_busy set, or the name is none or is taken; or what went wrong.
 */
int snapshots_write(struct snapshots *snapshots, const struct snapshot_wanted *wanted, size_t keep,
                    bool waits, struct snapshot_written *ret_written, bool *ret_is_busy,
                    struct store_error *error) __attribute__((warn_unused_result));

/* Loop thread, now and then: begins one where the schedule says so. `seq` is the last change. */
void snapshots_tick(struct snapshots *snapshots, const struct options *options, uint64_t seq);

struct snapshots_state {
    bool is_running;
    char
        name[EXPORT_NAME_BYTES]; /* of the one that runs, or ended last; "": none since the start */
    int64_t since_ms;            /* when it began */
    uint64_t bytes;              /* written so far, and … */
    uint64_t of;                 /* … about how many in all; 0: not known yet */
    uint64_t seq;                /* of one that has ended */
    char failure[STORE_ERROR_BYTES]; /* why the last one failed, or "" */
};

/* Any thread. */
void snapshots_read(struct snapshots *snapshots, struct snapshots_state *ret_state);

/* Where they are; see snapshot_list. Any thread, but not the loop's. */
int snapshots_list(struct snapshots *snapshots, struct snapshot_found **ret_list, size_t *ret_count,
                   char *error) __attribute__((warn_unused_result));
const char *snapshots_folder(const struct snapshots *snapshots);

#endif
