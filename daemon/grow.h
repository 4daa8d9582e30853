/*
 * grow: an array that grows by half when it is full, by an eighth once it is large; what is new is
 * zero.
 */
#ifndef UNDERTAG_GROW_H
#define UNDERTAG_GROW_H

#include <stddef.h>

/* From here on an array is large: mapped for itself (see main.c), it is moved without being copied,
 * and need not hold much in reserve. */
enum {
    GROW_LARGE_BYTES = 1 << 20
};

/*
 * Makes room for at least `needed` elements of `size` bytes behind *array, of which *capacity there
 * is now. The array may move. Returns 0 or -ENOMEM, with nothing changed.
 */
int grow_array(void **array, size_t *capacity, size_t needed, size_t size)
    __attribute__((warn_unused_result));

/* The same for a typed array: GROW(&list, &capacity, needed). */
#define GROW(array, capacity, needed)                                                              \
    grow_array((void **)(array), (capacity), (needed), sizeof **(array))

#endif
