#include "client/json_memory.h"

#include <setjmp.h>
#include <stdlib.h>

/* jansson's allocator is one for the program and is given nothing else, so this is, too. The client
 * has one thread. */
static struct {
    jmp_buf reader; /* where the reader is left to */
    bool is_reading;
    bool is_short;
} memory;

static void *allocate(size_t size)
{
    void *block = malloc(size);
    if (!block) {
        memory.is_short = true;
        if (memory.is_reading) {
            longjmp(memory.reader, 1);
        }
    }
    return block;
}

void json_memory_begin(void)
{
    json_set_alloc_funcs(allocate, free);
}

json_t *json_memory_read(const char *text, size_t length, size_t flags, json_error_t *ret_error)
{
    json_t *value = NULL;
    *ret_error = (json_error_t){0};
    if (setjmp(memory.reader) == 0) {
        memory.is_reading = true;
        value = json_loadb(text, length, flags, ret_error);
        memory.is_reading = false;
        return value;
    }
    memory.is_reading = false;
    return NULL;
}

char *json_memory_text(const json_t *value)
{
    char *text = json_dumps(value, JSON_COMPACT);
    if (memory.is_short) {
        free(text);
        text = NULL;
    }
    return text;
}

bool json_memory_is_short(void)
{
    return memory.is_short;
}
