/*
 * options_json: options with their values, as they are told of.
 */
#ifndef UNDERTAG_OPTIONS_JSON_H
#define UNDERTAG_OPTIONS_JSON_H

#include <jansson.h>

#include "daemon/options.h"

#define OPTIONS_IN(group) (1U << (group))

/* The options of these groups, OPTIONS_IN each, by name; NULL: no memory. */
json_t *options_json(const struct options *options, unsigned groups);

#endif
