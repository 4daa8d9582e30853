/*
 * meter: how many a second, over the last ten seconds or so. The clock is an argument.
 */
#ifndef UNDERTAG_METER_H
#define UNDERTAG_METER_H

#include <stddef.h>
#include <stdint.h>

enum {
    METER_SAMPLES = 11
};

/* Zero-initialised has seen nothing. Private. */
struct meter {
    struct {
        uint64_t total;
        uint64_t at_ms;
    } samples[METER_SAMPLES]; /* a ring */
    size_t next;
    size_t count;
};

/* Notes a running total; to be called about once a second. */
void meter_sample(struct meter *meter, uint64_t total, uint64_t now_ms);

/* How much the total has risen a second since the oldest sample. */
double meter_rate(const struct meter *meter, uint64_t total, uint64_t now_ms);

#endif
