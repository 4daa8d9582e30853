#include "daemon/json_memory.h"

#include <jansson.h>
#include <stdlib.h>

static _Thread_local bool was_refused;

static void *allocate(size_t size)
{
    void *memory = malloc(size);
    was_refused = was_refused || !memory;
    return memory;
}

void json_memory_watch(void)
{
    json_set_alloc_funcs(allocate, free);
}

bool json_memory_was_refused(void)
{
    bool result = was_refused;
    was_refused = false;
    return result;
}
