#include "daemon/build.h"

#include <errno.h>

#include "daemon/clock.h"
#include "daemon/learner/model_parts.h"
#include "daemon/learning_choices.h"
#include "daemon/model_keeper.h"
#include "storage/model_store_next.h"

enum {
    CHANGES_A_VIEW = 64,
    VIEW_LIMIT_US = 20000 /* a view that has been open this long is given up */
};

/* --- life ---------------------------------------------------------------------------------------
 */

static int make_parts(struct build *build, const struct options *options, struct store_error *error)
{
    struct features_settings words = options_features_settings(options);
    words.key = build->settings.key;
    if (learning_text(options, build->settings.number, build->text, sizeof build->text) < 0) {
        return store_fail(error, STORE_DENIED,
                          "the settings of learning are too long to be stored");
    }
    if (change_reader_new(&words, &build->reader) < 0 || model_scratch_new(&build->scratch) < 0) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    return STORE_OK;
}

static int make_model(struct build *build, const struct options *options, struct store_error *error)
{
    const struct model_settings settings = options_model_settings(options);
    model_free(build->model);
    build->model = NULL;
    return model_new(&settings, &build->settings.key, &build->model) == 0
               ? STORE_OK
               : (int)store_fail(error, STORE_NO_MEMORY, "there is no memory for a model");
}

static struct model_origin origin_of(const struct build *build, uint64_t last_seq)
{
    return (struct model_origin){.store_uuid = store_uuid(build->settings.store),
                                 .settings = build->text,
                                 .last_seq = last_seq};
}

/* Removes what is there, and opens an empty store. */
static int begin(struct build *build, const struct options *options, struct store_error *error)
{
    model_store_close(build->model_store);
    build->model_store = NULL;
    build->learned = 0;
    int code = model_store_remove_next(&build->settings.places, error);
    if (code == STORE_OK) {
        code = model_store_open_next(&build->settings.places, &build->model_store, error);
    }
    return code == STORE_OK ? make_model(build, options, error) : code;
}

static int last_seq(struct store *store, uint64_t *ret_seq, struct store_error *error)
{
    struct store_view *view = NULL;
    int code = store_read(store, &view, error);
    if (code == STORE_OK) {
        *ret_seq = store_view_totals(view).seq;
        store_end(view);
    }
    return code;
}

/* Loads what was kept; *ret_found is false where that is nothing, or of no use. */
static int take_up(struct build *build, const struct options *options, bool *ret_found,
                   struct store_error *error)
{
    uint64_t seq = 0;
    enum model_kept kept = MODEL_KEPT_NONE;
    int code = model_store_open_next(&build->settings.places, &build->model_store, error);
    if (code == STORE_OK) {
        code = last_seq(build->settings.store, &seq, error);
    }
    const struct model_origin origin = origin_of(build, seq);
    if (code == STORE_OK) {
        code = model_keeper_look(build->model_store, &origin, &kept, &build->learned, error);
    }
    if (code == STORE_OK && kept == MODEL_KEPT_OURS) {
        code = make_model(build, options, error);
        if (code == STORE_OK) {
            code = model_keeper_load(build->model_store, build->model, error);
        }
    }
    *ret_found = code == STORE_OK && kept == MODEL_KEPT_OURS;
    if (code == STORE_CORRUPT || code == STORE_NEWER) {
        *error = (struct store_error){0}; /* it can be learned from the items */
        code = STORE_OK;
    }
    return code;
}

/* What grows with the tags is not to be had for what can be let go of. */
static void share_memory(struct build *build)
{
    struct model_size size;
    model_measure(build->model, &size);
    uint64_t taken = size.counts_bytes + model_scratch_bytes(build->scratch);
    build->shares = memory_shares_of(build->settings.memory_bytes, taken);
    build->bytes = taken + size.dictionary_bytes + size.weights_bytes + build->shares.changed;
}

int build_open(const struct build_settings *settings, struct build *ret_build,
               struct store_error *error)
{
    struct build build = {.settings = *settings};
    bool is_found = false;
    build.settings.options = NULL; /* the caller's alone */
    int code = make_parts(&build, settings->options, error);
    if (code == STORE_OK) {
        code = take_up(&build, settings->options, &is_found, error);
    }
    if (code == STORE_OK && !is_found) {
        code = begin(&build, settings->options, error);
    }
    if (code != STORE_OK) {
        build_close(&build);
        return code;
    }
    share_memory(&build);
    build.kept = build.learned;
    build.kept_at_us = clock_steady_us();
    *ret_build = build;
    return STORE_OK;
}

void build_close(struct build *build)
{
    model_free(build->model);
    model_scratch_free(build->scratch);
    change_reader_free(build->reader);
    model_store_close(build->model_store);
    *build = (struct build){0};
}

/* --- learning -----------------------------------------------------------------------------------
 */

static int learn_change(struct build *build, struct store_view *view, uint64_t seq,
                        struct store_error *error)
{
    struct change_read read;
    int code =
        change_reader_read_anew(build->reader, view, seq, build->settings.moment, &read, error);
    if (code != STORE_OK || !(read.item || read.replaced)) {
        return code;
    }
    int result = model_learn(build->model, read.item, read.replaced, build->scratch);
    model_trim(build->model, build->shares.dictionary, build->shares.weights);
    if (result == -EIO) {
        *error = build->base.error;
        return store_fail(error, STORE_CORRUPT, "what was built so far cannot be read");
    }
    return result == 0
               ? STORE_OK
               : (int)store_fail(error, STORE_NO_MEMORY, "there is no memory to learn change %llu",
                                 (unsigned long long)seq);
}

bool build_is_full(const struct build *build)
{
    return model_changed_bytes(build->model) > build->shares.changed;
}

int build_learn(struct build *build, uint64_t last, struct store_error *error)
{
    struct store_view *view = NULL;
    int code = store_read(build->settings.store, &view, error);
    if (code != STORE_OK) {
        return code;
    }
    uint64_t begun_us = clock_steady_us();
    share_memory(build);
    model_base_enter(&build->base, build->model_store);
    model_scratch_read(build->scratch, &build->base.base);
    for (size_t i = 0; i < CHANGES_A_VIEW && build->learned < last && code == STORE_OK; i++) {
        code = learn_change(build, view, build->learned + 1, error);
        build->learned += code == STORE_OK ? 1 : 0;
        if (clock_steady_us() - begun_us > VIEW_LIMIT_US || build_is_full(build)) {
            break;
        }
    }
    model_base_leave(&build->base);
    store_end(view);
    return code;
}

int build_keep(struct build *build, struct store_error *error)
{
    if (build->learned == build->kept) {
        return STORE_OK;
    }
    const struct model_origin origin = origin_of(build, 0);
    bool forgot = false; /* what was forgotten in the middle is scrubbed once it is in use */
    uint64_t begun_us = clock_steady_us();
    int code = model_keeper_store(build->model_store, build->model, &origin, build->learned,
                                  &forgot, error);
    build->kept_at_us = clock_steady_us();
    build->keeping_us = build->kept_at_us - begun_us;
    if (code == STORE_OK) {
        model_clean(build->model);
        build->kept = build->learned;
    }
    return code;
}
