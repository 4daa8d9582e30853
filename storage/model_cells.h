/*
 * model_cells: a table of cells, each of the same few bytes and known by a number from 0 on. Many
 * to a record, since next to all of them change with every writing: so a writing takes a page for a
 * hundred of them, not one for each.
 *
 * A record has a checksum, a mark for each cell that is there, and the cells, zeros where there is
 * none.
 */
#ifndef UNDERTAG_MODEL_CELLS_H
#define UNDERTAG_MODEL_CELLS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "storage/kv.h"

enum {
    MODEL_CELLS_MOST = 64,      /* cells to a record */
    MODEL_CELLS_MOST_BYTES = 48 /* of a cell */
};

struct model_cells {
    unsigned table;
    size_t cell_bytes;
    size_t to_a_record;
    const char *what; /* one of them, in a sentence */
};

/* Cells that are to change. Zero-initialised is none, but for `cells`. */
struct model_cells_changes {
    const struct model_cells *cells;
    unsigned char *list;
    size_t count;
    size_t capacity;
};

void model_cells_deinit(struct model_cells_changes *changes);

/* Notes what a cell is from now on; NULL: it is not there. Returns STORE_OK or STORE_NO_MEMORY. */
int model_cells_note(struct model_cells_changes *changes, uint32_t number, const void *cell,
                     struct store_error *error) __attribute__((warn_unused_result));

/* Makes the changes, in the order in which they were noted where a cell was twice. */
int model_cells_make(struct model_cells_changes *changes, struct kv_txn *txn,
                     struct store_error *error) __attribute__((warn_unused_result));

/* A cell's bytes, valid as long as what a transaction hands out; STORE_NOT_FOUND where it is not
 * there. */
int model_cells_get(const struct model_cells *cells, struct kv_txn *txn, uint32_t number,
                    const unsigned char **ret_cell, struct store_error *error)
    __attribute__((warn_unused_result));

/* Calls `each` for the cells of a record, by rising number, until it returns anything but 0, which
 * is returned; STORE_CORRUPT for a record that is damaged. */
typedef int (*model_cells_each)(void *user, uint32_t number, const unsigned char *cell);
int model_cells_of_record(const struct model_cells *cells, struct kv_bytes key,
                          struct kv_bytes value, model_cells_each each, void *user,
                          struct store_error *error) __attribute__((warn_unused_result));

/* The number of a record's first cell. */
uint32_t model_cells_first(const struct model_cells *cells, struct kv_bytes key);

#endif
