#include "daemon/memory_shares.h"

/* The program itself, its libraries, what answers are made of, and holes between what was freed.
 * Measured over two minutes with 64 MiB: about 20 MiB. */
static const uint64_t PROGRAM_BYTES = 20U << 20U;

enum {
    CHANGED_PART = 3,   /* a third of the budget is for storing: the more is stored at a time, the
                           fewer pages an item takes. Measured with half a million tags: a quarter
                           has learning wait for a third of its time */
    LEAST_PART = 8,     /* an eighth of it is always left to the caches */
    DICTIONARY_PART = 4 /* a quarter of what is left is for words */
};

struct memory_shares memory_shares_of(uint64_t budget, uint64_t taken)
{
    uint64_t changed = budget / CHANGED_PART;
    uint64_t gone = changed + PROGRAM_BYTES + taken;
    uint64_t least = budget / LEAST_PART;
    uint64_t left = budget > gone + least ? budget - gone : least;
    return (struct memory_shares){.dictionary = left / DICTIONARY_PART,
                                  .weights = left - left / DICTIONARY_PART,
                                  .changed = changed};
}

uint64_t memory_shares_least_budget(uint64_t taken)
{
    /* What is left of it, once its parts for storing and for the caches are gone. */
    const uint64_t parts = (uint64_t)CHANGED_PART * LEAST_PART;
    return (PROGRAM_BYTES + taken) / (parts - CHANGED_PART - LEAST_PART) * parts;
}
