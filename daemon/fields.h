/*
 * fields: what an item says of itself beside its words: a JSON object of strings, numbers, booleans
 * or arrays of strings. Stored in one form for one meaning, and turned into the learner's
 * (name, value) pairs.
 */
#ifndef UNDERTAG_FIELDS_H
#define UNDERTAG_FIELDS_H

#include <jansson.h>
#include <stddef.h>

#include "daemon/fault.h"
#include "daemon/text/features.h"

/* Whether `fields` is what fields may be; `pointer` is where it stands in params ("/fields").
 * Returns 0 or the fault's code. */
int fields_check(const json_t *fields, const char *pointer, struct fault *fault)
    __attribute__((warn_unused_result));

/* The one form: members by name, no blanks; "" for an empty object. For free(); NULL: no memory. */
char *fields_canonical(const json_t *fields);

/* The pairs of one object at a time. Zero-initialised is empty. */
struct field_list {
    struct features_field *entries; /* point into the object, or into `numbers` */
    size_t count;
    size_t capacity;
    char (*numbers)[32];
    size_t number_capacity;
};

void field_list_deinit(struct field_list *list);

/* Fills the list from an object that fields_check has let through; borrowed while the list is
 * read. Returns 0 or -ENOMEM. */
int field_list_fill(struct field_list *list, const json_t *fields)
    __attribute__((warn_unused_result));

#endif
