/*
 * synthetic_phase: invented items to be filed, ready made.
 */
#ifndef UNDERTAG_BENCH_SYNTHETIC_PHASE_H
#define UNDERTAG_BENCH_SYNTHETIC_PHASE_H

#include "tests/bench/phase.h"
#include "tests/bench/synthetic.h"

/* Filings of the items from `first` up to `end`. 0, or -1 without memory. */
static inline int phase_of_synthetic(const struct synthetic *synthetic, uint64_t first,
                                     uint64_t end, struct phase *ret_phase)
{
    struct phase phase = {.method = "item.file", .window = PHASE_WINDOW};
    phase.params = calloc(end - first + 1, sizeof *phase.params);
    for (uint64_t item = first; phase.params && item < end; item++) {
        phase.params[phase.count] = synthetic_item(synthetic, item);
        if (!phase.params[phase.count]) {
            break;
        }
        phase.count++;
    }
    if (phase.count < end - first) {
        phase_deinit(&phase);
        return -1;
    }
    *ret_phase = phase;
    return 0;
}

#endif
