/*
 * tag_json: a tag as it is told of: what it is, how often it was given, and what to expect of it.
 */
#ifndef UNDERTAG_TAG_JSON_H
#define UNDERTAG_TAG_JSON_H

#include <jansson.h>

#include "daemon/outlook.h"
#include "storage/vocabulary.h"

/* "open", "retired". */
const char *tag_state_name(enum vocabulary_state state);

/* The result of tag.show; NULL: no memory. */
json_t *tag_json(const struct outlook *outlook, const struct vocabulary_tag *tag);

/* The curve that propensities are read from; likewise. */
json_t *tag_curve_json(const struct propensity_fit *fit);

#endif
