/*
 * backup_private: what the two files that are a backup share: backup (its life, and what all may
 * know) and backup_writing (the thread that writes it).
 */
#ifndef UNDERTAG_BACKUP_PRIVATE_H
#define UNDERTAG_BACKUP_PRIVATE_H

#include <pthread.h>

#include "daemon/backup.h"

struct backup {
    struct backup_settings settings;
    pthread_mutex_t mutex;
    pthread_cond_t moved; /* `stopping` has changed */
    bool stopping;        /* from here on: under the mutex */
    bool is_done;         /* the outcome waits to be taken */
    struct backup_state state;
    struct backup_outcome outcome; /* the thread's while it runs */

    bool is_begun; /* the thread is to be joined; the loop's */
    pthread_t thread;
    struct backup_wanted wanted;
};

/* So many more bytes are written, and no more are to be before `due_us` of the steady clock, until
 * which it waits. False: it is to stop. */
bool backup_count(struct backup *backup, uint64_t bytes, uint64_t due_us);

/* All may know its name, and how many bytes are expected. */
void backup_tell(struct backup *backup, const char *name, uint64_t of);

/* The thread's work: fills the outcome. */
void backup_write(struct backup *backup, struct backup_outcome *outcome);

#endif
