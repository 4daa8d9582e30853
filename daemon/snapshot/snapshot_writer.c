/*
 * Happy path: what needs the model's view first (words, weights, proposals), then what needs the
 * store's (tags, items), so that neither is open for longer than it takes to read it; then what is
 * made of what was read (rows of weights, the archive of them); the manifest last.
 */
#include "daemon/snapshot/snapshot_writer.h"

#include <stdio.h>
#include <string.h>
#include <time.h>

#include "daemon/learner/model.h"
#include "daemon/model_base.h"
#include "daemon/model_keeper.h"
#include "daemon/snapshot/snapshot_calibration.h"
#include "daemon/snapshot/snapshot_items.h"
#include "daemon/snapshot/snapshot_manifest.h"
#include "daemon/snapshot/snapshot_tags.h"
#include "daemon/snapshot/snapshot_text.h"
#include "daemon/snapshot/snapshot_weights.h"
#include "daemon/snapshot/snapshot_words.h"
#include "daemon/standing_json.h"

struct writing {
    const struct snapshot_task *task;
    struct export_part *part;
    struct store_error *error;
    struct model *model; /* what is held in memory of the stored model */
    uint64_t documents;
    struct snapshot_columns columns;
    struct snapshot_weights *weights;
    struct snapshot_counts counts;
    uint64_t bytes; /* of all files */
};

/* --- of the model's view ------------------------------------------------------------------------
 */

static int load_model(struct writing *writing)
{
    static const struct siphash_key NO_SECRET = {0}; /* it is asked for no word */
    const struct moment *moment = writing->task->moment;
    const struct model_settings settings = options_model_settings(&moment->learning);
    struct model_size size;
    uint64_t learned = 0;
    if (model_new(&settings, &NO_SECRET, &writing->model) < 0) {
        writing->model = NULL;
        return store_fail(writing->error, STORE_NO_MEMORY, "there is no memory for a snapshot");
    }
    int code = model_keeper_load_view(moment->model, writing->model, &learned, writing->error);
    if (code == STORE_NOT_FOUND) {
        return store_fail(writing->error, STORE_NOT_FOUND,
                          "there is nothing to write yet: no item has been filed");
    }
    if (code == STORE_OK && learned != moment->seq) {
        return store_fail(writing->error, STORE_CORRUPT, "the stored model is of another moment");
    }
    if (code == STORE_OK) {
        model_measure(writing->model, &size);
        moment_hold_memory(moment, size.counts_bytes + size.weights_bytes + size.worklist_bytes);
        writing->documents = size.documents;
        writing->counts.items = size.documents;
        writing->counts.tags = size.tags;
    }
    return code;
}

/* How much will be written is known about, so that progress can be told. */
static void expect(const struct writing *writing)
{
    enum {
        WORD_BYTES = 70,
        TAG_BYTES = 420,
        WEIGHT_BYTES = 24 /* once by words, once by tags, once packed */
    };
    struct model_size size;
    model_measure(writing->model, &size);
    atomic_store_explicit(&writing->task->pace->expected,
                          size.words * WORD_BYTES + size.tags * TAG_BYTES +
                              size.postings * WEIGHT_BYTES,
                          memory_order_relaxed);
}

static int write_proposals(struct writing *writing)
{
    const struct snapshot_task *task = writing->task;
    struct model_base base;
    model_base_borrow(&base, task->moment->model);
    return snapshot_proposals_write(writing->part, task->moment->store, writing->model, &base.base,
                                    task->wanted->floor, task->pace, writing->error);
}

static int write_of_model(struct writing *writing)
{
    const struct snapshot_task *task = writing->task;
    const struct snapshot_weights_settings settings = {
        .part = writing->part, .pace = task->pace, .error = writing->error};
    int code = load_model(writing);
    if (code == STORE_OK) {
        expect(writing);
        code = snapshot_words_write(writing->part, task->moment->model, writing->documents,
                                    task->pace, &writing->columns, writing->error);
    }
    if (code == STORE_OK) {
        code = snapshot_weights_copy(&settings, task->moment->model, writing->model,
                                     &writing->weights);
    }
    if (code == STORE_OK && task->wanted->proposals) {
        code = write_proposals(writing);
    }
    moment_leave_model(task->moment);
    return code;
}

/* --- of the store's -----------------------------------------------------------------------------
 */

static int write_of_store(struct writing *writing)
{
    const struct snapshot_task *task = writing->task;
    struct store_view *view = task->moment->store;
    int code = snapshot_tags_write(writing->part, view, writing->model, task->pace, writing->error);
    if (code == STORE_OK && task->wanted->items) {
        code = snapshot_items_write(writing->part, view, task->pace, writing->error);
    }
    moment_leave_store(task->moment);
    return code;
}

/* --- of what was read ---------------------------------------------------------------------------
 */

static int write_document(const struct writing *writing, const char *name, json_t *document)
{
    return snapshot_file_write(writing->part, name, document, writing->task->pace, writing->error);
}

static int write_documents(const struct writing *writing)
{
    const struct moment *moment = writing->task->moment;
    const struct features_settings words = options_features_settings(&moment->learning);
    struct standing_told told;
    standing_tell(model_standing(writing->model), STANDING_WINDOW, &told);
    int code = write_document(writing, "standing.json", standing_json(&told, moment->seq));
    if (code == STORE_OK) {
        code =
            write_document(writing, "calibration.json", snapshot_calibration_json(writing->model));
    }
    return code == STORE_OK ? write_document(writing, "text.json",
                                             snapshot_text_json(&words, writing->documents))
                            : code;
}

static int write_weights(struct writing *writing)
{
    const struct snapshot_columns *columns = &writing->columns;
    int code = snapshot_weights_write(writing->weights, columns->words, columns->count);
    return code == STORE_OK ? snapshot_weights_pack(writing->weights, columns->count) : code;
}

/* What is held in memory of the model is not needed for the large files. */
static int write_rest(struct writing *writing)
{
    struct propensity_fit fit = *model_fit(writing->model);
    int code = write_documents(writing);
    model_free(writing->model);
    writing->model = NULL;
    moment_hold_memory(writing->task->moment, 0);
    if (code == STORE_OK) {
        code = write_weights(writing);
    }
    writing->counts.words = writing->columns.count;
    writing->counts.weights = snapshot_weights_count(writing->weights);
    const struct snapshot_manifest manifest = {.name = writing->task->wanted->name,
                                               .is_named = writing->task->wanted->is_named,
                                               .seq = writing->task->moment->seq,
                                               .at_ms = writing->task->at_ms,
                                               .counts = writing->counts,
                                               .learning = &writing->task->moment->learning,
                                               .fit = &fit};
    return code == STORE_OK ? snapshot_manifest_write(writing->part, &manifest, writing->task->pace,
                                                      &writing->bytes, writing->error)
                            : code;
}

/* --- all of it ----------------------------------------------------------------------------------
 */

static int write_parts(struct writing *writing)
{
    int code = write_of_model(writing);
    if (code == STORE_OK) {
        code = write_of_store(writing);
    }
    if (code == STORE_OK) {
        code = write_rest(writing);
    }
    snapshot_weights_free(writing->weights);
    snapshot_columns_deinit(&writing->columns);
    model_free(writing->model);
    return code;
}

int snapshot_write(const struct snapshot_task *task, struct snapshot_written *ret_written,
                   struct store_error *error)
{
    char sentence[EXPORT_ERROR_BYTES];
    struct writing writing = {.task = task, .error = error};
    int result = export_folder_begin(task->folder, task->wanted->name, &writing.part, sentence);
    if (result < 0) {
        return snapshot_fail_export(error, result, sentence);
    }
    int code = write_parts(&writing);
    if (code != STORE_OK) {
        export_part_abort_take(writing.part);
        return code;
    }
    result = export_part_commit_take(writing.part, sentence);
    if (result < 0) {
        return snapshot_fail_export(error, result, sentence);
    }
    *ret_written = (struct snapshot_written){
        .seq = task->moment->seq, .bytes = writing.bytes, .at_ms = task->at_ms};
    memcpy(ret_written->name, task->wanted->name, sizeof ret_written->name);
    return STORE_OK;
}
