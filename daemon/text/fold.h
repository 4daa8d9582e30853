/*
 * fold: a piece of text in a normal form, and where each part of it came from. Pure.
 *
 * Two forms (Unicode Standard Annex #15 and section 3.13 of the Standard):
 *   FOLD_NFKC  Normalization Form KC;
 *   FOLD_CASE  NFKC of the full default case folding, without what is ignorable by default (soft
 *              hyphens, joiners, variation selectors). The apostrophe U+2019 becomes ', so that a
 *              word counts the same however its apostrophe was typed. Give it text in NFKC: only
 *              then do canonically equal texts always fold alike.
 *
 * The text is worked in stretches: a starter with the marks and conjoining letters after it, beyond
 * which nothing combines or changes order. The time is linear in the text, whatever it holds.
 */
#ifndef UNDERTAG_FOLD_H
#define UNDERTAG_FOLD_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum fold_form {
    FOLD_NFKC,
    FOLD_CASE
};

enum {
    FOLD_TEXT_BYTES = 1 << 28, /* a longer text is refused, so that offsets fit 32 bits */
    FOLD_APOSTROPHE = 0x2019   /* FOLD_CASE takes it for ' */
};

/* One stretch: where it starts in the result and where in the text it was made from. */
struct fold_stretch {
    uint32_t at;
    uint32_t origin;
};

/* A workspace; zero-initialised is empty. `text` and `bytes` may be read, the rest is private. */
struct fold {
    char *text; /* the result of the last fold_text; not ended by NUL */
    size_t bytes;
    size_t text_capacity;
    struct fold_stretch *stretches; /* rising in both members */
    size_t stretch_count;
    size_t stretch_capacity;
    uint32_t source_bytes;
    int32_t *points; /* the code points of the stretch being worked */
    size_t point_count;
    size_t point_capacity;
    int32_t *sorted; /* room to order long rows of marks */
    size_t sorted_capacity;
};

void fold_deinit(struct fold *fold);

/*
 * Puts `source` (valid UTF-8; a byte that is not counts as U+FFFD) into the form. Returns 0,
 * -ENOMEM, or -E2BIG beyond FOLD_TEXT_BYTES; on failure the result is empty.
 */
int fold_text(struct fold *fold, enum fold_form form, const char *source, size_t bytes)
    __attribute__((warn_unused_result));

/*
 * The offset in the source where the stretch of result byte `at` starts. `at` at the end of the
 * result gives the end of the source.
 */
size_t fold_origin_start(const struct fold *fold, size_t at);

/* The offset in the source behind everything that went into the result before byte `at`. */
size_t fold_origin_end(const struct fold *fold, size_t at);

/* Whether FOLD_CASE leaves a code point out. */
bool fold_ignores(int32_t point);

/* The version of Unicode by which texts are folded, such as "15.0.0". */
const char *fold_unicode_version(void);

#endif
