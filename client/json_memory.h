/*
 * json_memory: reading and writing JSON where there may be no memory for it.
 *
 * jansson's reader does not look at every allocation of its own (2.14): when one of its buffers
 * cannot grow, it goes on without what was to be put there, and may leave the buffer. So it is left
 * at once when memory is refused to it. And elsewhere jansson does not tell: a copy may lack a
 * part.
 */
#ifndef UNDERTAG_CLIENT_JSON_MEMORY_H
#define UNDERTAG_CLIENT_JSON_MEMORY_H

#include <jansson.h>
#include <stdbool.h>
#include <stddef.h>

/* Has jansson allocate through this module. Once, before any use of jansson. */
void json_memory_begin(void);

/*
 * json_loadb, but that it is left when there is no memory: then NULL is returned, *ret_error says
 * nothing, json_memory_is_short is true, and what was read so far is lost.
 */
json_t *json_memory_read(const char *text, size_t length, size_t flags, json_error_t *ret_error)
    __attribute__((warn_unused_result));

/* A value as text on one line, which the caller frees; NULL where there was no memory for it, or,
 * since json_memory_begin, for a part of anything: what would be sent might be another request. */
char *json_memory_text(const json_t *value) __attribute__((warn_unused_result));

/* Whether jansson has been refused memory since json_memory_begin. */
bool json_memory_is_short(void);

#endif
