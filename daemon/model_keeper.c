#include "daemon/model_keeper.h"

#include <assert.h>
#include <errno.h>
#include <string.h>

#include "daemon/learner/model_parts.h"

enum {
    BIN_VALUES = 1 + CALIBRATION_CLASSES /* the pairs, then the given ones by class */
};

int model_keeper_look(struct model_store *store, const struct model_origin *origin,
                      enum model_kept *ret_kept, uint64_t *ret_learned, struct store_error *error)
{
    struct model_store_head head;
    int code = model_store_read_head(store, &head, error);
    if (code == STORE_NOT_FOUND) {
        *error = (struct store_error){0}; /* a new home */
        *ret_kept = MODEL_KEPT_NONE;
        *ret_learned = 0;
        return STORE_OK;
    }
    if (code != STORE_OK) {
        return code;
    }
    if (memcmp(head.store_uuid, origin->store_uuid, STORE_UUID_BYTES) != 0 ||
        strcmp(head.settings, origin->settings) != 0) {
        *ret_kept = MODEL_KEPT_OTHER;
        *ret_learned = 0;
        return STORE_OK;
    }
    if (head.learned > origin->last_seq) {
        return store_fail(error, STORE_CORRUPT,
                          "the model has learned up to change %llu, but the store ends at %llu: "
                          "restore the store, or remove the model to have it learned again",
                          (unsigned long long)head.learned, (unsigned long long)origin->last_seq);
    }
    *ret_kept = MODEL_KEPT_OURS;
    *ret_learned = head.learned;
    return STORE_OK;
}

/* --- from the store into the model --------------------------------------------------------------
 */

static int load_word(void *user, const struct model_store_word *word)
{
    return model_restore_word(user, &(const struct model_word){.term = word->term,
                                                               .term_bytes = word->term_bytes,
                                                               .number = word->number,
                                                               .count = word->count});
}

static int load_chunk(void *user, const struct model_store_chunk *chunk)
{
    return model_restore_chunk(user,
                               &(const struct weights_chunk){.word = chunk->word,
                                                             .number = chunk->number,
                                                             .count = chunk->count,
                                                             .tags = chunk->tags,
                                                             .values = chunk->values,
                                                             .accumulators = chunk->accumulators});
}

static int load_tag(void *user, const struct model_store_tag *tag)
{
    return model_restore_tag(user,
                             &(const struct model_tag){.number = tag->number,
                                                       .count = tag->count,
                                                       .unprompted = tag->unprompted,
                                                       .bias = tag->bias,
                                                       .bias_accumulator = tag->bias_accumulator});
}

static int load_bin(void *user, const struct model_store_bin *bin)
{
    if (bin->count != BIN_VALUES) {
        return -EINVAL;
    }
    struct calibration_bin restored = {.pairs = bin->values[0]};
    memcpy(restored.given, bin->values + 1, sizeof restored.given);
    return model_restore_bin(user, bin->number, &restored);
}

static int fail_to_load(struct store_error *error, int code)
{
    if (code == -ENOMEM) {
        return store_fail(error, STORE_NO_MEMORY, "there is no memory for the model");
    }
    return store_fail(error, STORE_CORRUPT, "the stored model does not fit together");
}

int model_keeper_load(struct model_store *store, struct model *model, struct store_error *error)
{
    const struct model_store_sink sink = {
        .user = model, .word = load_word, .chunk = load_chunk, .tag = load_tag, .bin = load_bin};
    struct model_store_head head;
    int code = model_store_read_head(store, &head, error);
    if (code == STORE_OK) {
        code = model_store_load(store, &sink, error);
    }
    if (code != STORE_OK) {
        return error->code != STORE_OK ? (int)error->code : fail_to_load(error, code);
    }
    code = model_restore_totals(
        model, &(const struct model_totals){.documents = head.documents,
                                            .factor_count = head.factor_count,
                                            .factor_sum = head.factor_sum,
                                            .calibration_gain = head.calibration_gain});
    if (code == 0) {
        code = model_restored(model);
    }
    return code == 0 ? STORE_OK : fail_to_load(error, code);
}

/* --- from the model into the store --------------------------------------------------------------
 */

struct storing {
    struct model_store_writing *writing;
    const struct model_origin *origin;
    uint64_t learned;
    bool forgot;
    struct store_error *error;
};

static int store_forgotten(void *user, const struct model_word *word)
{
    struct storing *storing = user;
    storing->forgot = true;
    return model_store_forget_word(storing->writing,
                                   &(const struct model_store_word){.term = word->term,
                                                                    .term_bytes = word->term_bytes,
                                                                    .number = word->number},
                                   storing->error);
}

static int store_word(void *user, const struct model_word *word)
{
    struct storing *storing = user;
    return model_store_put_word(storing->writing,
                                &(const struct model_store_word){.term = word->term,
                                                                 .term_bytes = word->term_bytes,
                                                                 .number = word->number,
                                                                 .count = word->count},
                                storing->error);
}

static int store_chunk(void *user, const struct weights_chunk *chunk)
{
    struct storing *storing = user;
    return model_store_put_chunk(
        storing->writing,
        &(const struct model_store_chunk){.word = chunk->word,
                                          .number = chunk->number,
                                          .count = chunk->count,
                                          .tags = chunk->tags,
                                          .values = chunk->values,
                                          .accumulators = chunk->accumulators},
        storing->error);
}

static int store_tag(void *user, const struct model_tag *tag)
{
    struct storing *storing = user;
    return model_store_put_tag(
        storing->writing,
        &(const struct model_store_tag){.number = tag->number,
                                        .count = tag->count,
                                        .unprompted = tag->unprompted,
                                        .bias = tag->bias,
                                        .bias_accumulator = tag->bias_accumulator},
        storing->error);
}

static int store_bin(void *user, uint32_t number, const struct calibration_bin *bin)
{
    struct storing *storing = user;
    double values[BIN_VALUES] = {bin->pairs};
    memcpy(values + 1, bin->given, sizeof bin->given);
    return model_store_put_bin(
        storing->writing,
        &(const struct model_store_bin){.number = number, .count = BIN_VALUES, .values = values},
        storing->error);
}

static int store_totals(void *user, const struct model_totals *totals)
{
    struct storing *storing = user;
    struct model_store_head head = {.learned = storing->learned,
                                    .documents = totals->documents,
                                    .factor_count = totals->factor_count,
                                    .factor_sum = totals->factor_sum,
                                    .calibration_gain = totals->calibration_gain};
    size_t bytes = strlen(storing->origin->settings);
    assert(bytes < sizeof head.settings);
    memcpy(head.store_uuid, storing->origin->store_uuid, STORE_UUID_BYTES);
    memcpy(head.settings, storing->origin->settings, bytes + 1);
    return model_store_put_head(storing->writing, &head, storing->error);
}

int model_keeper_store(struct model_store *store, struct model *model,
                       const struct model_origin *origin, uint64_t learned, bool *ret_forgot,
                       struct store_error *error)
{
    struct storing storing = {.origin = origin, .learned = learned, .error = error};
    const struct model_sink sink = {.user = &storing,
                                    .forgotten = store_forgotten,
                                    .word = store_word,
                                    .chunk = store_chunk,
                                    .tag = store_tag,
                                    .bin = store_bin,
                                    .totals = store_totals};
    int code = model_store_begin(store, &storing.writing, error);
    if (code != STORE_OK) {
        return code;
    }
    code = model_changes(model, &sink);
    if (code != STORE_OK) {
        model_store_abort(storing.writing);
        return code;
    }
    code = model_store_commit(storing.writing, error);
    if (code == STORE_OK) {
        model_clean(model);
        *ret_forgot = storing.forgot;
    }
    return code;
}

int model_keeper_reset(struct model_store *store, struct store_error *error)
{
    struct model_store_writing *writing = NULL;
    int code = model_store_begin(store, &writing, error);
    if (code != STORE_OK) {
        return code;
    }
    code = model_store_clear(writing, error);
    if (code != STORE_OK) {
        model_store_abort(writing);
        return code;
    }
    return model_store_commit(writing, error);
}
