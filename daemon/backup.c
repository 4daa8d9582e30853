#include <errno.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <unistd.h>

#include "daemon/backup_private.h"
#include "daemon/clock.h"
#include "daemon/log.h"
#include "daemon/sync.h"

enum {
    NICE = 5 /* not more: as long as it takes, the files grow */
};

/* --- what all may know --------------------------------------------------------------------------
 */

void backup_tell(struct backup *backup, const char *name, uint64_t of)
{
    sync_lock(&backup->mutex);
    (void)stpncpy(backup->state.name, name, sizeof backup->state.name - 1);
    backup->state.of = of;
    sync_unlock(&backup->mutex);
}

bool backup_count(struct backup *backup, uint64_t bytes, uint64_t due_us)
{
    uint64_t now_us = clock_steady_us();
    struct timespec deadline = sync_deadline(due_us > now_us ? (due_us - now_us) / 1000 : 0);
    int code = due_us > now_us ? 0 : ETIMEDOUT;
    sync_lock(&backup->mutex);
    backup->state.bytes += bytes;
    while (!backup->stopping && code == 0) {
        code = pthread_cond_timedwait(&backup->moved, &backup->mutex, &deadline);
    }
    bool goes_on = !backup->stopping;
    sync_unlock(&backup->mutex);
    return goes_on;
}

void backup_read(struct backup *backup, struct backup_state *ret_state)
{
    sync_lock(&backup->mutex);
    *ret_state = backup->state;
    sync_unlock(&backup->mutex);
}

/* --- the thread ---------------------------------------------------------------------------------
 */

static void tell_outcome(const struct backup_outcome *outcome)
{
    if (outcome->code == 0) {
        log_line(LOG_NOTE, "backup: %s is written: up to change %llu, %llu bytes in %.1f s",
                 outcome->path, (unsigned long long)outcome->seq,
                 (unsigned long long)outcome->bytes, outcome->seconds);
    } else if (outcome->code == -ECANCELED) {
        log_line(LOG_NOTE, "backup: ended unfinished, since the daemon stops");
    } else {
        log_line(LOG_CAUTION, "backup: none was written: %s", outcome->error);
    }
}

static void *run(void *argument)
{
    struct backup *backup = argument;
    struct backup_outcome *outcome = &backup->outcome;
    uint64_t begun_us = clock_steady_us();
    /* Of this thread alone. It may always be nicer; where it cannot be, it goes on all the same. */
    (void)setpriority(PRIO_PROCESS, (id_t)gettid(), NICE);
    backup_write(backup, outcome);
    outcome->seconds = (double)(clock_steady_us() - begun_us) / 1e6;
    tell_outcome(outcome);
    sync_lock(&backup->mutex);
    backup->state = (struct backup_state){0};
    backup->is_done = true;
    sync_unlock(&backup->mutex);
    backup->settings.done(backup->settings.user);
    return NULL;
}

/* --- the loop -----------------------------------------------------------------------------------
 */

static int claim(struct backup *backup)
{
    sync_lock(&backup->mutex);
    int code = backup->stopping                              ? -ECANCELED
               : backup->state.is_running || backup->is_done ? -EBUSY
                                                             : 0;
    if (code == 0) {
        backup->state = (struct backup_state){.is_running = true, .since_ms = clock_wall_ms()};
    }
    sync_unlock(&backup->mutex);
    return code;
}

static void join(struct backup *backup)
{
    if (backup->is_begun) {
        sync_join(backup->thread);
        backup->is_begun = false;
    }
}

int backup_begin(struct backup *backup, const struct backup_wanted *wanted)
{
    int code = claim(backup);
    if (code < 0) {
        return code;
    }
    join(backup); /* it has ended, but for its last step */
    backup->wanted = *wanted;
    backup->outcome = (struct backup_outcome){0};
    code = -pthread_create(&backup->thread, NULL, run, backup);
    backup->is_begun = code == 0;
    if (code < 0) {
        sync_lock(&backup->mutex);
        backup->state = (struct backup_state){0};
        sync_unlock(&backup->mutex);
    }
    return code;
}

bool backup_take_done(struct backup *backup, struct backup_outcome *ret_outcome)
{
    sync_lock(&backup->mutex);
    bool is_done = backup->is_done;
    if (is_done) {
        *ret_outcome = backup->outcome;
        backup->is_done = false;
    }
    sync_unlock(&backup->mutex);
    return is_done;
}

/* --- life ---------------------------------------------------------------------------------------
 */

int backup_new(const struct backup_settings *settings, struct backup **ret_backup)
{
    struct backup *backup = calloc(1, sizeof *backup);
    if (!backup) {
        return -ENOMEM;
    }
    int code = -pthread_mutex_init(&backup->mutex, NULL);
    if (code < 0) {
        free(backup);
        return code;
    }
    code = sync_init_condition(&backup->moved);
    if (code < 0) {
        (void)pthread_mutex_destroy(&backup->mutex); /* nobody knows it yet */
        free(backup);
        return code;
    }
    backup->settings = *settings;
    *ret_backup = backup;
    return 0;
}

void backup_stop(struct backup *backup)
{
    sync_lock(&backup->mutex);
    backup->stopping = true;
    (void)pthread_cond_broadcast(&backup->moved);
    sync_unlock(&backup->mutex);
}

void backup_free(struct backup *backup)
{
    if (!backup) {
        return;
    }
    join(backup);
    (void)pthread_cond_destroy(&backup->moved); /* nobody waits any more */
    (void)pthread_mutex_destroy(&backup->mutex);
    free(backup);
}
