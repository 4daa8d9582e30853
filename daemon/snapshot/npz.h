/*
 * npz: arrays in one file of the NPZ format: a ZIP archive whose members are files of the NPY
 * format (npy.h), by libzip.
 */
#ifndef UNDERTAG_NPZ_H
#define UNDERTAG_NPZ_H

#include <stddef.h>
#include <stdint.h>

#include "daemon/export_folder.h"
#include "daemon/pace.h"

enum {
    NPZ_TEXT_BYTES = 192
};

/* A small member's bytes. */
struct npz_text {
    size_t size;
    unsigned char bytes[NPZ_TEXT_BYTES];
};

/* The array that says b'csr', and that of the shape. */
void npz_format(struct npz_text *ret_text);
void npz_shape(struct npz_text *ret_text, uint64_t rows, uint64_t columns);

/* One of the two is there. */
struct npz_member {
    const char *name;
    const char *file; /* in the same part */
    const struct npz_text *text;
};

/* Makes the archive in the part. */
int npz_write(struct export_part *part, const char *name, const struct npz_member *members,
              size_t count, struct pace *pace, struct store_error *error)
    __attribute__((warn_unused_result));

#endif
