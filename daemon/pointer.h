/*
 * pointer: JSON Pointers (RFC 6901), which name the member of params that is to blame.
 */
#ifndef UNDERTAG_POINTER_H
#define UNDERTAG_POINTER_H

#include <stddef.h>

/* Writes the pointer to a member of what `base` points to ("" for params itself): base, a slash,
 * and the name with ~ and / escaped. What does not fit is cut. */
void pointer_to_member(char *pointer, size_t size, const char *base, const char *name);

/* The same for an element of an array. */
void pointer_to_element(char *pointer, size_t size, const char *base, size_t index);

#endif
