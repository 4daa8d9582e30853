/*
 * part_marks: which of a few numbered parts are to be stored: a byte each for those that have
 * changed, and for those that are on their way to the store (see model_parts.h).
 */
#ifndef UNDERTAG_PART_MARKS_H
#define UNDERTAG_PART_MARKS_H

#include <stddef.h>
#include <stdint.h>

/* What has changed is sealed, beside what has been. */
static inline void part_marks_seal(uint8_t *changed, uint8_t *sealed, size_t count)
{
    for (size_t i = 0; i < count; i++) {
        sealed[i] |= changed[i];
        changed[i] = 0;
    }
}

#endif
