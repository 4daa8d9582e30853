/*
 * features: what the learner sees of an item: its different terms with their frequencies. Pure.
 *
 * A term is a word of title or text, a pair of words, or a field as "name=value". The frequency of
 * a term is its count in the text plus `title_weight` times its count in the title; a field has
 * frequency 1, however often it is given. Words never hold '=' and never hold a space, so the three
 * kinds cannot collide. Fields are codes, not prose: they are counted as they are, neither
 * normalised nor folded.
 *
 * A workspace serves one thread at a time; what it hands out is valid until the next extraction. It
 * keeps the room that its largest item needed.
 */
#ifndef UNDERTAG_FEATURES_H
#define UNDERTAG_FEATURES_H

#include <stddef.h>
#include <stdint.h>

#include "daemon/text/siphash.h"
#include "daemon/text/words.h"

struct features;

struct feature {
    const char *term; /* not ended by NUL */
    uint32_t term_bytes;
    float frequency;
    const char *surface; /* its first appearance as written; points into the source. The term
                          * itself for a field. */
    uint32_t surface_bytes;
};

/* A field's name and one value of it, as text. A value of an array is an entry of its own. */
struct features_field {
    const char *name;
    const char *value;
};

enum {
    FEATURES_FIELD_BYTES = 255
}; /* a longer "name=value" is passed over */

/* All borrowed for the extraction and for as long as the features' surfaces are read. */
struct features_source {
    const char *title;
    size_t title_bytes;
    const char *text;
    size_t text_bytes;
    const char *language; /* NULL for the default */
    const struct features_field *fields;
    size_t field_count;
};

struct features_settings {
    struct words_settings words;
    double title_weight;    /* above 0 */
    struct siphash_key key; /* a secret, so that nobody can choose words that collide; it changes
                             * nothing in the result */
};

/* Makes a workspace; the settings are copied. Returns 0 or -ENOMEM. */
int features_new(const struct features_settings *settings, struct features **ret_features)
    __attribute__((warn_unused_result));

void features_free(struct features *features);

/*
 * Extracts the different terms of the source, in the order of first appearance (title, text,
 * fields). Returns 0, -ENOMEM, or -E2BIG when there are more than `most` different terms or a text
 * is beyond words_scan. On failure the features are empty.
 */
int features_extract(struct features *features, const struct features_source *source, size_t most)
    __attribute__((warn_unused_result));

size_t features_count(const struct features *features);

/* The features of the last extraction, features_count of them. */
const struct feature *features_list(const struct features *features);

#endif
