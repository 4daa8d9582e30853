/*
 * sync: mutexes, and conditions whose timed waits follow the steady clock. Where locking fails the
 * program is wrong, and ends.
 */
#ifndef UNDERTAG_SYNC_H
#define UNDERTAG_SYNC_H

#include <pthread.h>
#include <stdint.h>
#include <time.h>

void sync_lock(pthread_mutex_t *mutex);
void sync_unlock(pthread_mutex_t *mutex);

/* Returns 0 or a negative errno. */
int sync_init_condition(pthread_cond_t *condition) __attribute__((warn_unused_result));

/* The time to wait until, for such a condition. */
struct timespec sync_deadline(uint64_t from_now_ms);

/* Waits for the thread's end. */
void sync_join(pthread_t thread);

#endif
