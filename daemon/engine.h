/*
 * engine: a home that is open: the store, the model, and the two threads that change them. What the
 * methods stand on.
 */
#ifndef UNDERTAG_ENGINE_H
#define UNDERTAG_ENGINE_H

#include <stdint.h>

#include "daemon/backlog.h"
#include "daemon/moment.h"

#include "daemon/backup.h"
#include "daemon/options.h"
#include "daemon/rebuild.h"
#include "daemon/troubles.h"
#include "daemon/workspace.h"
#include "daemon/writer.h"
#include "storage/store.h"

struct engine;

struct engine_settings {
    const char *home;              /* borrowed for the engine's life */
    const struct options *options; /* as configured; copied */
    void *user;
    void (*changes_done)(void *user); /* engine_take_done or backup_take_done has something; any
                                         thread */
};

enum {
    ENGINE_ERROR_BYTES = 640
};

/*
 * Opens the home, loads what is stored of the model, and starts to learn what it is behind. On
 * failure returns the exit code for main (sysexits.h), with a sentence in `error`.
 */
int engine_open(const struct engine_settings *settings, struct engine **ret_engine, char *error)
    __attribute__((warn_unused_result));

/* Ends both threads, stores the model and closes the home. Returns the exit code for main: not 0
 * where a write had failed so that none was taken any more. */
int engine_close(struct engine *engine);

/* --- changes: loop thread --- */

void engine_push(struct engine *engine, struct change *change);
struct change *engine_take_done(struct engine *engine);

/* --- learning anew: any thread, but not the loop --- */

/* See rebuild.h. */
int engine_rebuild(struct engine *engine, const struct options *wanted, uint64_t *ret_seq,
                   struct store_error *error) __attribute__((warn_unused_result));
void engine_read_rebuild(struct engine *engine, struct rebuild_state *ret_state);

/* Lays the learning options that are in force over those that are configured. */
void engine_lay_over(struct engine *engine, struct options *options);

/* --- copying: a thread that may wait, one at a time --- */

/* See moment.h. It must be given back before the engine is closed. */
int engine_take_moment(struct engine *engine, struct moment *ret_moment, struct store_error *error)
    __attribute__((warn_unused_result));
void engine_give_back(struct engine *engine, struct moment *moment);

/* Who waits for a moment is told that the daemon stops. Any thread. */
void engine_stop_moments(struct engine *engine);

/* --- backups --- */

struct backup *engine_backup(struct engine *engine);

/* --- reading: any thread --- */

struct store *engine_store(struct engine *engine);
struct workspaces *engine_workspaces(struct engine *engine);

/*
 * Asks the model, which has learned what it must have (see backlog.h) and says up to where. The
 * answer lies in the workspace's scratch. Returns 0; -ENOMEM where memory ran out, now or when the
 * model learned last; -EIO where what is stored of the model cannot be read; or -ESTALE where
 * another model has come since the workspace was borrowed: its features are not that model's, and
 * the question has to be made again in another workspace.
 */
int engine_ask(struct engine *engine, const struct model_question *question,
               struct workspace *workspace, struct model_answer *ret_answer, uint64_t *ret_learned)
    __attribute__((warn_unused_result));

/*
 * Has the model read by `read`, which must not keep it, when it has learned what it must have.
 * Returns 0, -ENOMEM where memory ran out when the model learned last, or -EIO where what was
 * stored of it could not be read then.
 */
int engine_read_model(struct engine *engine,
                      void (*read)(void *user, const struct model *model, const struct base *base,
                                   uint64_t learned),
                      void *user) __attribute__((warn_unused_result));

struct engine_counts {
    struct backlog_numbers progress;
    uint64_t questions; /* asked since the start */
};

/* What can be told without waiting. */
struct engine_counts engine_count(struct engine *engine);

struct engine_size {
    struct model_size model;
    uint64_t store_bytes;
    uint64_t model_bytes; /* in its file */
    struct model_rehearsal rehearsal;
    uint64_t rehearsals_due;
    uint64_t asking_bytes; /* held for those who ask */
    uint64_t budget_bytes; /* for memory */
};

/* Waits for the model's lock. */
void engine_measure(struct engine *engine, struct engine_size *ret_size);

/* Whether the two threads move. */
struct heartbeat *engine_heartbeat(struct engine *engine);

struct troubles *engine_troubles(struct engine *engine);

#endif
