/*
 * clock: the two clocks, read in one place. Any thread.
 */
#ifndef UNDERTAG_CLOCK_H
#define UNDERTAG_CLOCK_H

#include <pthread.h>
#include <stdint.h>
#include <time.h>

/* A steady clock with an arbitrary beginning. */
uint64_t clock_steady_us(void);
uint64_t clock_steady_ms(void);

/* A condition whose timed waits follow the steady clock. Returns 0 or a negative errno. */
int clock_init_condition(pthread_cond_t *condition) __attribute__((warn_unused_result));

/* The time to wait until, for such a condition. */
struct timespec clock_deadline(uint64_t from_now_ms);

/* Milliseconds since 1970, UTC. */
int64_t clock_wall_ms(void);

#endif
