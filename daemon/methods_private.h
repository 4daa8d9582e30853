/*
 * methods_private: what the families of methods share: the context, and the methods themselves for
 * the table.
 */
#ifndef UNDERTAG_METHODS_PRIVATE_H
#define UNDERTAG_METHODS_PRIVATE_H

#include <uv.h>

#include "daemon/gate.h"
#include "daemon/meter.h"
#include "daemon/methods.h"

struct methods {
    uv_loop_t *loop;
    const struct options *options;
    struct engine *engine;
    struct snapshots *snapshots;
    const struct server *server;
    struct call *backup_call; /* of the backup that is being written; NULL: none is */
    struct gate gate;
    struct method_table table;
    uint64_t started_ms;
    struct meter filed;
    struct meter learned;
    struct meter scored;

    uv_async_t changes_done;
    uv_timer_t sampling;
    unsigned open_handles;
    void (*closed)(void *user);
    void *closed_user;
};

/* change_job.c: ends the calls of the changes that are done. */
void item_changes_done(struct change *done);

/* item_change.c */
void item_file(struct call *call, const json_t *params);
void item_withdraw(struct call *call, const json_t *params);

/* item_examine.c */
void item_rule(struct call *call, const json_t *params);
void item_check(struct call *call, const json_t *params);

/* item_gaps.c */
void item_gaps(struct call *call, const json_t *params);

/* item_read.c */
void item_show(struct call *call, const json_t *params);
void item_list(struct call *call, const json_t *params);

/* tag_read.c */
void tag_show(struct call *call, const json_t *params);
void tag_list(struct call *call, const json_t *params);

/* desk_*.c */
void desk_sample(struct call *call, const json_t *params);
void desk_worklist(struct call *call, const json_t *params);
void desk_completeness(struct call *call, const json_t *params);
void desk_standing(struct call *call, const json_t *params);

/* daemon_state.c */
void daemon_state(struct call *call, const json_t *params);

/* daemon_rebuild.c */
void daemon_rebuild(struct call *call, const json_t *params);

/* snapshot_calls.c */
void snapshot_write_call(struct call *call, const json_t *params);
void snapshot_list_call(struct call *call, const json_t *params);
/* daemon_backup.c */
void daemon_backup(struct call *call, const json_t *params);
/* Ends the call of the backup that has ended, if one has. */
void daemon_backup_done(struct methods *methods);

#endif
