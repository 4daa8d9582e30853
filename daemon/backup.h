/*
 * backup: writes a copy of model and store, of which a home can be made, while all goes on. One at
 * a time, on a thread of its own.
 *
 * The model is copied first, so that it has never learned beyond the store's last change. What lies
 * between them a restored daemon learns, as behind any crash; for that it needs what those changes
 * have replaced, so the writer erases nothing behind the copied model until the store's copy has
 * fixed its moment. Meanwhile no rebuild begins.
 */
#ifndef UNDERTAG_BACKUP_H
#define UNDERTAG_BACKUP_H

#include <limits.h>
#include <stdbool.h>
#include <stdint.h>

#include "daemon/backlog.h"
#include "daemon/export_folder.h"
#include "daemon/options.h"
#include "daemon/rebuild.h"
#include "daemon/shared_model.h"
#include "storage/store.h"

struct backup;

enum {
    BACKUP_WORD_BYTES = 256, /* a name, or the path of one */
    BACKUP_RATE_LEAST = 1 << 20,
    BACKUP_RATE = 64 << 20
};

struct backup_settings {
    const char *home;              /* borrowed, as are all the others */
    const struct options *options; /* as configured */
    struct store *store;
    struct shared_model *shared;
    struct backlog *backlog;
    struct rebuild *rebuild;
    void *writer_user;
    void (*let_go)(void *writer_user); /* the writer may erase more again; the backup's thread */
    void *user;
    void (*done)(void *user); /* backup_take_done has something; the backup's thread */
};

int backup_new(const struct backup_settings *settings, struct backup **ret_backup)
    __attribute__((warn_unused_result));

/* Ends the one that is being written, which leaves nothing, and refuses others. Any thread; does
 * not wait. */
void backup_stop(struct backup *backup);

/* Waits for the thread. NULL is allowed. */
void backup_free(struct backup *backup);

/* --- one of them: loop thread --- */

struct backup_wanted {
    char name[BACKUP_WORD_BYTES]; /* "": one made of the time; with a slash, a path in the folder of
                                   * the option export_dir */
    uint64_t rate;                /* bytes a second */
};

/* Begins. -EBUSY while one is being written, -ECANCELED once it is to stop. */
int backup_begin(struct backup *backup, const struct backup_wanted *wanted)
    __attribute__((warn_unused_result));

struct backup_outcome {
    int code;           /* 0, or a negative errno; -ECANCELED: stopped, -EBADMSG: damage */
    bool is_name_wrong; /* it is the name that is to blame */
    char error[EXPORT_ERROR_BYTES];
    char name[EXPORT_NAME_BYTES];
    char path[PATH_MAX];
    uint64_t seq;
    uint64_t learned;
    uint64_t bytes;
    double seconds;
};

/* What became of the one that has ended; false where none has since. */
bool backup_take_done(struct backup *backup, struct backup_outcome *ret_outcome);

/* --- any thread --- */

struct backup_state {
    bool is_running;
    char name[EXPORT_NAME_BYTES]; /* "" before it is known to be right */
    uint64_t bytes;               /* of both files, written so far */
    uint64_t of;                  /* as many as were expected; 0 before that is known */
    int64_t since_ms;             /* when it began: milliseconds since 1970, UTC */
};

void backup_read(struct backup *backup, struct backup_state *ret_state);

#endif
