#include "daemon/clock.h"

#include <time.h>

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

int64_t clock_wall_ms(void)
{
    struct timespec now = {0};
    (void)clock_gettime(CLOCK_REALTIME, &now); /* always there on Linux */
    return (int64_t)now.tv_sec * 1000 + now.tv_nsec / 1000000;
}
