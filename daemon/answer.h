/*
 * answer: building the JSON of an answer member by member; the first thing that there is no memory
 * for makes the whole NULL, which a read_job takes for that.
 */
#ifndef UNDERTAG_ANSWER_H
#define UNDERTAG_ANSWER_H

#include <jansson.h>
#include <stdint.h>

/* Adds a member to *object, or an entry to *array, and takes it. Where either is NULL, or memory
 * runs out, *object or *array is freed and NULL from then on. */
void answer_add(json_t **object, const char *name, json_t *value);
void answer_append(json_t **array, json_t *value);

/* A number; null where it is not one: nothing is known. */
json_t *answer_number(double value);

/* A count. */
json_t *answer_count(uint64_t count);

#endif
