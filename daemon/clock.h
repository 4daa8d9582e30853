/*
 * clock: the two clocks, read in one place. Any thread.
 */
#ifndef UNDERTAG_CLOCK_H
#define UNDERTAG_CLOCK_H

#include <stdint.h>

/* A steady clock with an arbitrary beginning. */
uint64_t clock_steady_us(void);
uint64_t clock_steady_ms(void);

/* Milliseconds since 1970, UTC. */
int64_t clock_wall_ms(void);

#endif
