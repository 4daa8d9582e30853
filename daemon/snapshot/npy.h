/*
 * npy: arrays of numbers in files of the NPY format, version 1.0 (NumPy Enhancement Proposal 1:
 * magic, version, length of the header, a header that is a Python literal, then the numbers as they
 * lie in memory). Written through a map, so that the numbers may come in any order and are the
 * system's pages, not ours.
 */
#ifndef UNDERTAG_NPY_H
#define UNDERTAG_NPY_H

#include <stddef.h>
#include <stdint.h>

#include "daemon/export_folder.h"
#include "storage/store_error.h"

enum npy_type {
    NPY_F4, /* float */
    NPY_I4, /* int32_t */
    NPY_I8  /* int64_t */
};

enum {
    NPY_HEADER_BYTES = 128 /* of every file that is made here */
};

/* A file of one array of `count` numbers that is being written; `data` has room for them. */
struct npy {
    void *data;
    uint64_t count;
    uint64_t file_bytes;
    void *map; /* private, to the end */
    int fd;
};

/* Bytes of one number. */
size_t npy_number_bytes(enum npy_type type);

/* Fills the header of an array of one dimension; or of any, by the literals of its type and its
 * shape (short ones). */
void npy_header(unsigned char header[NPY_HEADER_BYTES], enum npy_type type, uint64_t count);
void npy_header_of(unsigned char header[NPY_HEADER_BYTES], const char *type, const char *shape);

/*
 * Makes the file in the part, with room on the disk for all of it (STORE_FULL where there is none),
 * so that no write into the map can fail.
 */
int npy_create(struct export_part *part, const char *name, enum npy_type type, uint64_t count,
               struct npy *ret_npy, struct store_error *error) __attribute__((warn_unused_result));

/* Closes it, whatever was written; a zeroed one is passed over. */
void npy_close(struct npy *npy);

#endif
