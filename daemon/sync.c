#include "daemon/sync.h"

#include <errno.h>
#include <stdlib.h>

void sync_lock(pthread_mutex_t *mutex)
{
    if (pthread_mutex_lock(mutex) != 0) {
        abort();
    }
}

void sync_unlock(pthread_mutex_t *mutex)
{
    if (pthread_mutex_unlock(mutex) != 0) {
        abort();
    }
}

void sync_join(pthread_t thread)
{
    if (pthread_join(thread, NULL) != 0) {
        abort();
    }
}

int sync_init_condition(pthread_cond_t *condition)
{
    pthread_condattr_t attributes;
    if (pthread_condattr_init(&attributes) != 0) {
        return -ENOMEM;
    }
    int code = pthread_condattr_setclock(&attributes, CLOCK_MONOTONIC);
    if (code == 0) {
        code = pthread_cond_init(condition, &attributes);
    }
    (void)pthread_condattr_destroy(&attributes); /* no failure for an initialised one */
    return -code;
}

struct timespec sync_deadline(uint64_t from_now_ms)
{
    struct timespec deadline = {0};
    (void)clock_gettime(CLOCK_MONOTONIC, &deadline); /* always there on Linux */
    deadline.tv_sec += (time_t)(from_now_ms / 1000U);
    deadline.tv_nsec += (long)(from_now_ms % 1000U) * 1000000L;
    if (deadline.tv_nsec >= 1000000000L) {
        deadline.tv_nsec -= 1000000000L;
        deadline.tv_sec++;
    }
    return deadline;
}
