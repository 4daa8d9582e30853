#include "daemon/pointer.h"

#include <stdio.h>
#include <string.h>

void pointer_to_member(char *pointer, size_t size, const char *base, const char *name)
{
    int written = snprintf(pointer, size, "%s/", base);
    size_t used = written < 0 ? 0 : (size_t)written;
    for (; *name != '\0' && used + 2 < size; name++) {
        if (*name == '~' || *name == '/') {
            pointer[used++] = '~';
            pointer[used++] = *name == '~' ? '0' : '1';
        } else {
            pointer[used++] = *name;
        }
    }
    if (used < size) {
        pointer[used] = '\0';
    }
}

void pointer_to_element(char *pointer, size_t size, const char *base, size_t index)
{
    (void)snprintf(pointer, size, "%s/%zu", base, index); /* what does not fit is cut */
}
