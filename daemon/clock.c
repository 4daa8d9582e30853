#include "daemon/clock.h"

#include <errno.h>

uint64_t clock_steady_us(void)
{
    struct timespec now = {0};
    (void)clock_gettime(CLOCK_MONOTONIC, &now); /* always there on Linux */
    return (uint64_t)now.tv_sec * 1000000U + (uint64_t)now.tv_nsec / 1000U;
}

uint64_t clock_steady_ms(void)
{
    return clock_steady_us() / 1000U;
}

int clock_init_condition(pthread_cond_t *condition)
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

struct timespec clock_deadline(uint64_t from_now_ms)
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

int64_t clock_wall_ms(void)
{
    struct timespec now = {0};
    (void)clock_gettime(CLOCK_REALTIME, &now); /* always there on Linux */
    return (int64_t)now.tv_sec * 1000 + now.tv_nsec / 1000000;
}
