/*
 * snapshot_text: a snapshot's text.json: how an item's title, text, fields and language become the
 * x that is scored. With it and words.jsonl nobody needs a library of Unicode's to cut words as
 * they were cut here: the properties of all code points that the rules ask for are in it.
 */
#ifndef UNDERTAG_SNAPSHOT_TEXT_H
#define UNDERTAG_SNAPSHOT_TEXT_H

#include <jansson.h>
#include <stdint.h>

#include "daemon/text/features.h"

/* `documents` are the items counted in, N. NULL where there is no memory. Takes some 50 ms. */
json_t *snapshot_text_json(const struct features_settings *settings, uint64_t documents);

#endif
