/*
 * pace: writing much without taking the disk from others: at most so many bytes a second, with a
 * count that others may look at, until it is to stop.
 */
#ifndef UNDERTAG_PACE_H
#define UNDERTAG_PACE_H

#include <stdatomic.h>
#include <stdbool.h>
#include <stdint.h>

#include "storage/store_error.h"

/* pace_init makes it; done and expected may be read by any thread. */
struct pace {
    uint64_t bytes_a_second; /* 0: no limit */
    uint64_t begun_us;
    atomic_uint_fast64_t done;
    atomic_uint_fast64_t expected; /* in all, as far as it is known; 0: not yet */
    atomic_bool stopping;
};

void pace_init(struct pace *pace, uint64_t bytes_a_second);

/*
 * Counts bytes that were written, and waits until as much time has passed as they may take.
 * STORE_STOPPED once pace_stop was called.
 */
int pace_add(struct pace *pace, uint64_t bytes, struct store_error *error)
    __attribute__((warn_unused_result));

/* Any thread. */
void pace_stop(struct pace *pace);

#endif
