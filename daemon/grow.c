#include "daemon/grow.h"

#include <errno.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

enum {
    PART = 2,
    LARGE_PART = 8
};

int grow_array(void **array, size_t *capacity, size_t needed, size_t size)
{
    if (needed <= *capacity) {
        return 0;
    }
    size_t wanted =
        *capacity + *capacity / (*capacity >= GROW_LARGE_BYTES / size ? LARGE_PART : PART);
    if (wanted < needed) {
        wanted = needed;
    }
    if (wanted < 8) {
        wanted = 8;
    }
    if (wanted > SIZE_MAX / size) {
        return -ENOMEM;
    }
    char *grown = realloc(*array, wanted * size);
    if (!grown) {
        return -ENOMEM;
    }
    memset(grown + *capacity * size, 0, (wanted - *capacity) * size);
    *array = grown;
    *capacity = wanted;
    return 0;
}
