/*
 * point_ranges: properties of Unicode's code points as JSON: ranges [first, last], rising. Code
 * points that are surrogates stand in no text and are left out.
 */
#ifndef UNDERTAG_POINT_RANGES_H
#define UNDERTAG_POINT_RANGES_H

#include <jansson.h>
#include <stdbool.h>
#include <stdint.h>

/* The code points that have it. NULL where there is no memory. */
json_t *point_ranges_json(bool (*has)(int32_t point));

/* By the name that each has, which lives on, but for those with the name `left_out`. */
json_t *point_ranges_by_name_json(const char *(*name_of)(int32_t point), const char *left_out);

#endif
