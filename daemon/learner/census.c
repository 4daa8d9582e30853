#include "daemon/learner/census.h"

#include <math.h>

enum {
    EXACT_COUNTS = 64,
    EXACT_OCTAVE = 6,
    STEPS_PER_OCTAVE = 8
};

size_t census_bin(uint32_t count)
{
    if (count < EXACT_COUNTS) {
        return count;
    }
    unsigned octave = 31U - (unsigned)__builtin_clz(count);
    unsigned step = (count >> (octave - 3U)) & 7U;
    return EXACT_COUNTS + (octave - EXACT_OCTAVE) * STEPS_PER_OCTAVE + step;
}

double census_middle(size_t bin)
{
    if (bin < EXACT_COUNTS) {
        return (double)bin;
    }
    size_t octave = EXACT_OCTAVE + (bin - EXACT_COUNTS) / STEPS_PER_OCTAVE;
    size_t step = (bin - EXACT_COUNTS) % STEPS_PER_OCTAVE;
    double width = ldexp(1.0, (int)octave - 3);
    return (8.0 + (double)step + 0.5) * width - 0.5;
}
