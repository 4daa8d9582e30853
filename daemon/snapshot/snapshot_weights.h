/*
 * snapshot_weights: the learner's weights as a matrix, tags × words, in compressed sparse rows.
 *
 * They are stored by word. So they are copied as they lie into a file that has no name, which is
 * all that needs the stored model; then that file is gone through word by word, and each weight put
 * into its tag's row, in files that are mapped. So neither copy is ever in memory of our own, nor
 * are the places of words and rows.
 */
#ifndef UNDERTAG_SNAPSHOT_WEIGHTS_H
#define UNDERTAG_SNAPSHOT_WEIGHTS_H

#include "daemon/export_folder.h"
#include "daemon/learner/model.h"
#include "daemon/pace.h"
#include "storage/model_view.h"

struct snapshot_weights;

/* What the two steps are about; borrowed. */
struct snapshot_weights_settings {
    struct export_part *part; /* the snapshot */
    struct pace *pace;
    struct store_error *error;
};

/* Copies the weights of a stored model, of which `model` is what is held in memory. */
int snapshot_weights_copy(const struct snapshot_weights_settings *settings, struct model_view *view,
                          const struct model *model, struct snapshot_weights **ret_weights)
    __attribute__((warn_unused_result));
void snapshot_weights_free(struct snapshot_weights *weights); /* NULL is passed over */

/*
 * Writes weights_data.npy, weights_indices.npy and weights_indptr.npy. `words` are the numbers of
 * the words whose columns there are, in their order; a row's columns rise.
 */
int snapshot_weights_write(struct snapshot_weights *weights, const uint32_t *words,
                           size_t word_count) __attribute__((warn_unused_result));

/* Weights that are not 0. */
uint64_t snapshot_weights_count(const struct snapshot_weights *weights);

/* Makes weights.npz of these files, as scipy.sparse.save_npz lays out a matrix of this shape. */
int snapshot_weights_pack(const struct snapshot_weights *weights, size_t word_count)
    __attribute__((warn_unused_result));

#endif
