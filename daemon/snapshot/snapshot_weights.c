#include "daemon/snapshot/snapshot_weights.h"

#include <errno.h>
#include <fcntl.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mman.h>
#include <unistd.h>

#include "daemon/snapshot/npy.h"
#include "daemon/snapshot/npz.h"
#include "daemon/snapshot/snapshot_file.h"
#include "daemon/snapshot/snapshot_room.h"

#define DATA_NAME "weights_data.npy"
#define INDICES_NAME "weights_indices.npy"
#define INDPTR_NAME "weights_indptr.npy"

struct snapshot_weights {
    struct snapshot_weights_settings settings;
    const struct model *model; /* while they are copied */
    int fd;                    /* of the copy by words: pairs, one after the other */
    uint64_t count;            /* of pairs */
    struct snapshot_room starts_room;
    struct snapshot_room counts_room;
    uint64_t *starts;     /* by word's number: where its pairs begin; and where the last end */
    size_t next_word;     /* words below it have their start */
    size_t word_limit;    /* numbers are below it */
    uint32_t *row_counts; /* by tag */
    size_t tag_count;
    FILE *copy; /* the same file, while it is written */
};

/* --- the copy -----------------------------------------------------------------------------------
 */

/* Words up to this one have no pairs but those that they have. */
static void begin_words(struct snapshot_weights *weights, size_t until)
{
    while (weights->next_word < until) {
        weights->starts[weights->next_word++] = weights->count;
    }
}

static int copy_chunk(void *user, const struct model_store_chunk *chunk)
{
    struct snapshot_weights *weights = user;
    struct store_error *error = weights->settings.error;
    struct weights_pair pairs[WEIGHTS_CHUNK_PAIRS];
    int count = model_read_chunk(
        weights->model, (struct base_bytes){.data = chunk->bytes.data, .size = chunk->bytes.size},
        pairs);
    if (count < 0 || chunk->word >= weights->word_limit) {
        return store_fail(error, STORE_CORRUPT, "a stored chunk of the model is damaged");
    }
    begin_words(weights, (size_t)chunk->word + 1);
    if (fwrite(pairs, sizeof pairs[0], (size_t)count, weights->copy) != (size_t)count) {
        return snapshot_fail(error, "a copy of the weights", errno);
    }
    for (int i = 0; i < count; i++) {
        weights->row_counts[pairs[i].tag]++;
    }
    weights->count += (uint64_t)count;
    return pace_add(weights->settings.pace, (uint64_t)count * sizeof pairs[0], error);
}

static int open_copy(struct snapshot_weights *weights)
{
    struct store_error *error = weights->settings.error;
    int code = snapshot_room_open(weights->settings.part, &weights->fd, error);
    if (code != STORE_OK) {
        return code;
    }
    int stream_fd = fcntl(weights->fd, F_DUPFD_CLOEXEC, 0);
    weights->copy = stream_fd >= 0 ? fdopen(stream_fd, "w") : NULL;
    if (weights->copy) {
        return STORE_OK;
    }
    int errnum = errno;
    if (stream_fd >= 0) {
        (void)close(stream_fd); /* nothing is in it */
    }
    return snapshot_fail(error, "a copy of the weights", errnum);
}

static int close_copy(struct snapshot_weights *weights, int code)
{
    int failed = fclose(weights->copy);
    int errnum = errno;
    weights->copy = NULL;
    return code == STORE_OK && failed != 0
               ? snapshot_fail(weights->settings.error, "a copy of the weights", errnum)
               : code;
}

static int copy_chunks(struct snapshot_weights *weights, struct model_view *view)
{
    int code = open_copy(weights);
    if (code != STORE_OK) {
        return code;
    }
    code = model_view_each_chunk(view, copy_chunk, weights, weights->settings.error);
    begin_words(weights, weights->word_limit + 1);
    return close_copy(weights, code);
}

static int make_room(struct snapshot_weights *weights)
{
    const struct snapshot_weights_settings *settings = &weights->settings;
    int code =
        snapshot_room_make(settings->part, (weights->word_limit + 1) * sizeof *weights->starts,
                           &weights->starts_room, settings->error);
    if (code == STORE_OK) {
        code = snapshot_room_make(settings->part,
                                  (weights->tag_count + 1) * sizeof *weights->row_counts,
                                  &weights->counts_room, settings->error);
    }
    weights->starts = weights->starts_room.data;
    weights->row_counts = weights->counts_room.data;
    return code;
}

int snapshot_weights_copy(const struct snapshot_weights_settings *settings, struct model_view *view,
                          const struct model *model, struct snapshot_weights **ret_weights)
{
    struct model_size size;
    struct model_store_head head;
    int code = model_view_head(view, &head, settings->error);
    if (code != STORE_OK) {
        return code;
    }
    model_measure(model, &size);
    struct snapshot_weights *weights = calloc(1, sizeof *weights);
    if (!weights) {
        return store_fail(settings->error, STORE_NO_MEMORY, "there is no memory for a snapshot");
    }
    *weights = (struct snapshot_weights){.settings = *settings,
                                         .model = model,
                                         .fd = -1,
                                         .word_limit = (size_t)head.next_word,
                                         .tag_count = (size_t)size.tags};
    code = make_room(weights);
    if (code == STORE_OK) {
        code = copy_chunks(weights, view);
    }
    weights->model = NULL;
    if (code != STORE_OK) {
        snapshot_weights_free(weights);
        return code;
    }
    *ret_weights = weights;
    return STORE_OK;
}

void snapshot_weights_free(struct snapshot_weights *weights)
{
    if (!weights) {
        return;
    }
    if (weights->fd >= 0) {
        (void)close(weights->fd); /* it has no name: all of it is gone */
    }
    snapshot_room_free(&weights->starts_room);
    snapshot_room_free(&weights->counts_room);
    free(weights);
}

uint64_t snapshot_weights_count(const struct snapshot_weights *weights)
{
    return weights->count;
}

/* --- rows ---------------------------------------------------------------------------------------
 */

/* The three arrays, as they are written. */
struct arrays {
    struct npy data;
    struct npy indices;
    struct npy indptr;
    struct snapshot_room room;
    uint64_t *next; /* by tag: where the row's next weight goes */
};

/* As scipy has it: whole numbers of 32 bits where they are enough. */
static enum npy_type index_type(const struct snapshot_weights *weights)
{
    return weights->count <= INT32_MAX ? NPY_I4 : NPY_I8;
}

static void put_index(enum npy_type type, void *indices, uint64_t at, uint64_t value)
{
    if (type == NPY_I4) {
        ((int32_t *)indices)[at] = (int32_t)value;
    } else {
        ((int64_t *)indices)[at] = (int64_t)value;
    }
}

static int create_arrays(const struct snapshot_weights *weights, struct arrays *arrays)
{
    enum npy_type type = index_type(weights);
    struct export_part *part = weights->settings.part;
    struct store_error *error = weights->settings.error;
    int code = npy_create(part, DATA_NAME, NPY_F4, weights->count, &arrays->data, error);
    if (code == STORE_OK) {
        code = npy_create(part, INDICES_NAME, type, weights->count, &arrays->indices, error);
    }
    if (code == STORE_OK) {
        code = npy_create(part, INDPTR_NAME, type, weights->tag_count + 1, &arrays->indptr, error);
    }
    if (code == STORE_OK) {
        code = snapshot_room_make(part, (weights->tag_count + 1) * sizeof *arrays->next,
                                  &arrays->room, error);
    }
    arrays->next = arrays->room.data;
    return code;
}

static void begin_rows(const struct snapshot_weights *weights, struct arrays *arrays)
{
    enum npy_type type = index_type(weights);
    uint64_t start = 0;
    for (size_t tag = 0; tag < weights->tag_count; tag++) {
        put_index(type, arrays->indptr.data, tag, start);
        arrays->next[tag] = start;
        start += weights->row_counts[tag];
    }
    put_index(type, arrays->indptr.data, weights->tag_count, start);
}

static int put_columns(const struct snapshot_weights *weights, struct arrays *arrays,
                       const struct weights_pair *pairs, const uint32_t *words, size_t word_count)
{
    enum npy_type type = index_type(weights);
    float *data = arrays->data.data;
    uint64_t placed = 0;
    for (size_t column = 0; column < word_count; column++) {
        uint64_t from = weights->starts[words[column]];
        uint64_t until = weights->starts[words[column] + 1];
        for (uint64_t i = from; i < until; i++) {
            uint64_t at = arrays->next[pairs[i].tag]++;
            data[at] = pairs[i].weight;
            put_index(type, arrays->indices.data, at, column);
        }
        placed += until - from;
        int code = pace_add(weights->settings.pace,
                            (until - from) * (sizeof *data + npy_number_bytes(type)),
                            weights->settings.error);
        if (code != STORE_OK) {
            return code;
        }
    }
    return placed == weights->count
               ? STORE_OK
               : (int)store_fail(weights->settings.error, STORE_CORRUPT,
                                 "the stored model has weights of words that it does not know");
}

/* Goes through the copy, mapped. */
static int turn(const struct snapshot_weights *weights, struct arrays *arrays,
                const uint32_t *words, size_t word_count)
{
    size_t bytes = (size_t)weights->count * sizeof(struct weights_pair);
    if (bytes == 0) {
        return STORE_OK;
    }
    void *map = mmap(NULL, bytes, PROT_READ, MAP_SHARED, weights->fd, 0);
    if (map == MAP_FAILED) {
        return snapshot_fail(weights->settings.error, "a copy of the weights", errno);
    }
    int code = put_columns(weights, arrays, map, words, word_count);
    (void)munmap(map, bytes); /* it was mapped so */
    return code;
}

int snapshot_weights_write(struct snapshot_weights *weights, const uint32_t *words,
                           size_t word_count)
{
    struct arrays arrays = {0};
    int code = create_arrays(weights, &arrays);
    if (code == STORE_OK) {
        begin_rows(weights, &arrays);
        code = turn(weights, &arrays, words, word_count);
    }
    npy_close(&arrays.data);
    npy_close(&arrays.indices);
    npy_close(&arrays.indptr);
    snapshot_room_free(&arrays.room);
    return code;
}

/* --- one file of all ----------------------------------------------------------------------------
 */

int snapshot_weights_pack(const struct snapshot_weights *weights, size_t word_count)
{
    struct npz_text format;
    struct npz_text shape;
    npz_format(&format);
    npz_shape(&shape, weights->tag_count, word_count);
    /* In the order of save_npz. */
    const struct npz_member members[] = {{.name = "indices.npy", .file = INDICES_NAME},
                                         {.name = "indptr.npy", .file = INDPTR_NAME},
                                         {.name = "format.npy", .text = &format},
                                         {.name = "shape.npy", .text = &shape},
                                         {.name = "data.npy", .file = DATA_NAME}};
    return npz_write(weights->settings.part, "weights.npz", members,
                     sizeof members / sizeof members[0], weights->settings.pace,
                     weights->settings.error);
}
