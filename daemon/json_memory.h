/*
 * json_memory: whether jansson has been refused memory. It does not tell: a text that it could not
 * read for want of memory looks like a faulty one, and a text that it wrote may lack a part.
 */
#ifndef UNDERTAG_JSON_MEMORY_H
#define UNDERTAG_JSON_MEMORY_H

#include <stdbool.h>

/* Has jansson allocate through this module. Once, before any use of jansson. */
void json_memory_watch(void);

/* Whether this thread was refused since it last asked; begins anew. */
bool json_memory_was_refused(void);

#endif
