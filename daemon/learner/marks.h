/*
 * marks: a set of small numbers that can be walked and emptied in the time of its size: which
 * words or tags have changed since they were last stored.
 */
#ifndef UNDERTAG_MARKS_H
#define UNDERTAG_MARKS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* Zero-initialised is empty. All members are private but `list` and `count`, which may be read. */
struct marks {
    uint32_t *list;
    size_t count;
    size_t list_capacity;
    uint8_t *is_set;
    size_t is_set_capacity;
};

void marks_deinit(struct marks *marks);

/* Adds a number; adding it again changes nothing. Returns 0 or -ENOMEM. */
int marks_add(struct marks *marks, uint32_t number) __attribute__((warn_unused_result));

/* Adds all of another set's numbers. Returns 0, or -ENOMEM with some of them added. */
int marks_join(struct marks *marks, const struct marks *other) __attribute__((warn_unused_result));

bool marks_has(const struct marks *marks, uint32_t number);

/* Empties the set and keeps its memory. */
void marks_clear(struct marks *marks);

uint64_t marks_bytes(const struct marks *marks);

#endif
