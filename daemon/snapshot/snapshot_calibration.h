/*
 * snapshot_calibration: a snapshot's calibration.json: how the scores of an item's tags become
 * chances (model_chances.h), with all the numbers that this takes beside tags.jsonl.
 */
#ifndef UNDERTAG_SNAPSHOT_CALIBRATION_H
#define UNDERTAG_SNAPSHOT_CALIBRATION_H

#include <jansson.h>

#include "daemon/learner/model.h"

/* NULL where there is no memory. The model must not learn meanwhile. */
json_t *snapshot_calibration_json(const struct model *model);

#endif
