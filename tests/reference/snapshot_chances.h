/*
 * snapshot_chances: the chances of a draft's tags, by the steps of a snapshot's calibration.json.
 */
#ifndef UNDERTAG_TESTS_SNAPSHOT_CHANCES_H
#define UNDERTAG_TESTS_SNAPSHOT_CHANCES_H

#include "tests/reference/snapshot_files.h"

/*
 * By row: the score, and the chance that the tag belongs to the draft, or, where that has `tags`,
 * that it is missing; NaN of tags that the draft has and of those that no item has.
 */
void snapshot_chances(struct snapshot_files *files, const json_t *draft, double *ret_scores,
                      double *ret_chances);

#endif
