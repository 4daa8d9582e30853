#include "daemon/pace.h"

#include <time.h>

#include "daemon/clock.h"

enum {
    LONGEST_WAIT_US = 50000 /* then it looks again whether it is to stop */
};

void pace_init(struct pace *pace, uint64_t bytes_a_second)
{
    pace->bytes_a_second = bytes_a_second;
    pace->begun_us = clock_steady_us();
    atomic_init(&pace->done, 0);
    atomic_init(&pace->expected, 0);
    atomic_init(&pace->stopping, false);
}

void pace_stop(struct pace *pace)
{
    atomic_store_explicit(&pace->stopping, true, memory_order_relaxed);
}

static void wait_us(uint64_t time_us)
{
    struct timespec time = {.tv_sec = (time_t)(time_us / 1000000),
                            .tv_nsec = (long)(time_us % 1000000) * 1000};
    (void)nanosleep(&time, NULL); /* woken early, it is looked at again */
}

int pace_add(struct pace *pace, uint64_t bytes, struct store_error *error)
{
    uint64_t done = atomic_fetch_add_explicit(&pace->done, bytes, memory_order_relaxed) + bytes;
    while (!atomic_load_explicit(&pace->stopping, memory_order_relaxed)) {
        double due_us =
            pace->bytes_a_second > 0 ? (double)done * 1e6 / (double)pace->bytes_a_second : 0.0;
        double early_us = due_us - (double)(clock_steady_us() - pace->begun_us);
        if (early_us < 1000.0) {
            return STORE_OK;
        }
        wait_us(early_us < LONGEST_WAIT_US ? (uint64_t)early_us : LONGEST_WAIT_US);
    }
    return store_fail(error, STORE_STOPPED, "the daemon is stopping");
}
