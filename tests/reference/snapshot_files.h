/*
 * snapshot_files: a snapshot's folder read with nothing but its files, as a program that has no
 * daemon would: arrays are mapped, the rest is JSON. Of undertag it uses the text code alone, with
 * the settings that text.json has.
 *
 * Everything fails the test instead of returning an error: include cmocka.h before this.
 */
#ifndef UNDERTAG_TESTS_SNAPSHOT_FILES_H
#define UNDERTAG_TESTS_SNAPSHOT_FILES_H

#include <jansson.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "daemon/text/features.h"

/* An array of one dimension in a mapped file. */
struct snapshot_array {
    const void *numbers;
    size_t count;
    size_t number_bytes;
    void *map;
    size_t map_bytes;
};

/* A line of tags.jsonl. */
struct snapshot_tag {
    const char *name; /* the snapshot's */
    double bias;
    double count;
    double unprompted;
    double p;
    double p_allowed;
};

struct snapshot_files {
    struct snapshot_array data;    /* float: the weights, row by row */
    struct snapshot_array indices; /* int32_t or int64_t: their columns */
    struct snapshot_array indptr;  /* likewise: where rows begin, and the end */
    struct snapshot_tag *tags;     /* by row */
    size_t tag_count;
    double *holding; /* by column: the items that hold the word */
    size_t word_count;
    json_t *rows;    /* of tags, by name */
    json_t *columns; /* of words */
    json_t *tag_lines;
    json_t *text;
    json_t *calibration;
    struct features *features;
    double *x; /* by column, of the draft at hand; 0 elsewhere */
};

void snapshot_files_open(struct snapshot_files *files, const char *folder);
void snapshot_files_close(struct snapshot_files *files);

/* The row of a tag; tag_count where there is none. */
size_t snapshot_files_row(const struct snapshot_files *files, const char *tag);

/*
 * The score of each tag for a draft, and whether any of its words has a weight for any tag. A draft
 * has title, text, language and fields, all optional.
 */
void snapshot_files_score(struct snapshot_files *files, const json_t *draft, double *ret_scores,
                          bool *ret_speaks);

/* A number of a JSON object, which must be there. */
double snapshot_number(const json_t *object, const char *name);

#endif
