#include "daemon/model_keeper.h"

#include <assert.h>
#include <errno.h>
#include <string.h>

#include "daemon/learner/model_parts.h"

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

static int load_tag(void *user, const struct model_store_tag *tag)
{
    return model_restore_tag(
        user,
        &(const struct model_tag){.number = tag->number,
                                  .count = tag->count,
                                  .unprompted = tag->unprompted,
                                  .trial_halves = tag->trial_halves,
                                  .given_halves = tag->given_halves,
                                  .bias = {tag->bias, tag->bias_accumulator},
                                  .shadow_bias = {tag->shadow_bias, tag->shadow_bias_accumulator},
                                  .given_count = tag->last_count});
}

static int load_figures(void *user, const struct model_store_figures *figures)
{
    if (figures->kind >= MODEL_FIGURES_KINDS) {
        return -EINVAL;
    }
    return model_restore_figures(
        user, &(const struct model_figures){.kind = (enum model_figures_kind)figures->kind,
                                            .number = figures->number,
                                            .count = figures->count,
                                            .values = figures->values});
}

static int fail_to_load(struct store_error *error, int code)
{
    if (code == -ENOMEM) {
        return store_fail(error, STORE_NO_MEMORY, "there is no memory for the model");
    }
    return store_fail(error, STORE_CORRUPT, "the stored model does not fit together");
}

static struct model_totals totals_of(const struct model_store_head *head)
{
    return (struct model_totals){
        .documents = head->documents,
        .factor_count = head->factor_count,
        .factor_sum = head->factor_sum,
        .latest = head->latest,
        .evidence_items = head->evidence_items,
        .curves_items = head->curves_items,
        .fit_halves = head->fit_halves,
        .evidence_gain = head->evidence_gain,
        .words = {.next_number = (uint32_t)head->next_word, .size = (uint32_t)head->words},
        .postings = head->postings,
        .pruned = {.unspecific = head->pruned_unspecific, .tiny = head->pruned_tiny},
        .rehearsal = {.at = head->rehearsed,
                      .turns = head->rehearsal_turns,
                      .rounds = head->rehearsals,
                      .items = head->rehearsed_items},
        .examples = head->examples};
}

int model_keeper_load_view(struct model_view *view, struct model *model, uint64_t *ret_learned,
                           struct store_error *error)
{
    const struct model_store_sink sink = {.user = model, .tag = load_tag, .figures = load_figures};
    struct model_store_head head;
    int code = model_view_head(view, &head, error);
    if (code == STORE_NOT_FOUND) {
        return code;
    }
    if (code == STORE_OK) {
        code = model_view_load(view, &sink, error);
    }
    if (code != STORE_OK) {
        return error->code != STORE_OK ? (int)error->code : fail_to_load(error, code);
    }
    const struct model_totals totals = totals_of(&head);
    code = head.words > UINT32_MAX || head.next_word > UINT32_MAX
               ? -EINVAL
               : model_restore_totals(model, &totals);
    if (code == 0) {
        code = model_restored(model);
    }
    *ret_learned = head.learned;
    return code == 0 ? STORE_OK : fail_to_load(error, code);
}

int model_keeper_load(struct model_store *store, struct model *model, struct store_error *error)
{
    struct model_view *view = NULL;
    uint64_t learned = 0;
    int code = model_view_open(store, &view, error);
    if (code != STORE_OK) {
        return code;
    }
    code = model_keeper_load_view(view, model, &learned, error);
    model_view_close(view);
    if (code == STORE_NOT_FOUND) { /* whoever loads a model has looked whether there is one */
        *error = (struct store_error){0};
        code = fail_to_load(error, -EINVAL);
    }
    return code;
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

static int store_forgotten(void *user, const struct dictionary_word *word)
{
    struct storing *storing = user;
    storing->forgot = true;
    return model_store_forget_word(storing->writing,
                                   &(const struct model_store_word){.term = word->term,
                                                                    .term_bytes = word->term_bytes,
                                                                    .number = word->number},
                                   storing->error);
}

static int store_word(void *user, const struct dictionary_word *word)
{
    struct storing *storing = user;
    if (!word->is_new) {
        return model_store_put_count(storing->writing, word->number, word->count, storing->error);
    }
    return model_store_put_word(storing->writing,
                                &(const struct model_store_word){.term = word->term,
                                                                 .term_bytes = word->term_bytes,
                                                                 .number = word->number,
                                                                 .count = word->count},
                                storing->error);
}

static int cut_chunk(void *user, const struct weights_chunk *chunk)
{
    struct storing *storing = user;
    return model_store_remove_chunk(storing->writing, chunk->word, chunk->number, storing->error);
}

static int store_chunk(void *user, const struct weights_chunk *chunk)
{
    struct storing *storing = user;
    return model_store_put_chunk(storing->writing,
                                 &(const struct model_store_chunk){
                                     .word = chunk->word,
                                     .number = chunk->number,
                                     .bytes = kv_bytes_of(chunk->bytes.data, chunk->bytes.size)},
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
                                        .trial_halves = tag->trial_halves,
                                        .given_halves = tag->given_halves,
                                        .bias = tag->bias.value,
                                        .bias_accumulator = tag->bias.accumulator,
                                        .shadow_bias = tag->shadow_bias.value,
                                        .shadow_bias_accumulator = tag->shadow_bias.accumulator,
                                        .last_count = tag->given_count},
        storing->error);
}

static int store_figures(void *user, const struct model_figures *figures)
{
    struct storing *storing = user;
    assert(figures->count <= MODEL_STORE_MOST_FIGURES);
    return model_store_put_figures(
        storing->writing,
        &(const struct model_store_figures){.kind = (uint32_t)figures->kind,
                                            .number = figures->number,
                                            .count = (uint32_t)figures->count,
                                            .values = figures->values},
        storing->error);
}

static int store_entry(void *user, const struct worklist_entry *entry)
{
    struct storing *storing = user;
    uint32_t gap_tags[WORKLIST_GAPS];
    float scores[WORKLIST_GAPS];
    uint32_t pair_tags[WORKLIST_GAPS];
    float pair_values[WORKLIST_GAPS * MODEL_STORE_PAIR_VALUES];
    for (uint32_t i = 0; i < entry->gap_count; i++) {
        gap_tags[i] = entry->gaps[i].tag;
        scores[i] = entry->gaps[i].score;
    }
    for (uint32_t i = 0; i < entry->pair_count; i++) {
        float *values = pair_values + (size_t)i * MODEL_STORE_PAIR_VALUES;
        pair_tags[i] = entry->pairs[i].tag;
        values[0] = entry->pairs[i].counted;
        values[1] = entry->pairs[i].own;
    }
    return model_store_put_entry(
        storing->writing,
        &(const struct model_store_entry){.number = entry->number,
                                          .scored = entry->scored,
                                          .counted = entry->counted,
                                          .promise = entry->promise,
                                          .gaps = {entry->gap_count, gap_tags, scores},
                                          .pairs = {entry->pair_count, pair_tags, pair_values}},
        storing->error);
}

static int remove_entry(void *user, uint64_t number)
{
    struct storing *storing = user;
    return model_store_remove_entry(storing->writing, number, storing->error);
}

static int store_totals(void *user, const struct model_totals *totals)
{
    struct storing *storing = user;
    struct model_store_head head = {.learned = storing->learned,
                                    .documents = totals->documents,
                                    .factor_count = totals->factor_count,
                                    .factor_sum = totals->factor_sum,
                                    .latest = totals->latest,
                                    .evidence_items = totals->evidence_items,
                                    .curves_items = totals->curves_items,
                                    .fit_halves = totals->fit_halves,
                                    .evidence_gain = totals->evidence_gain,
                                    .words = totals->words.size,
                                    .next_word = totals->words.next_number,
                                    .postings = totals->postings,
                                    .pruned_unspecific = totals->pruned.unspecific,
                                    .pruned_tiny = totals->pruned.tiny,
                                    .rehearsed = totals->rehearsal.at,
                                    .rehearsal_turns = totals->rehearsal.turns,
                                    .rehearsals = totals->rehearsal.rounds,
                                    .rehearsed_items = totals->rehearsal.items,
                                    .examples = totals->examples};
    size_t bytes = strlen(storing->origin->settings);
    assert(bytes < sizeof head.settings);
    memcpy(head.store_uuid, storing->origin->store_uuid, STORE_UUID_BYTES);
    memcpy(head.settings, storing->origin->settings, bytes + 1);
    return model_store_put_head(storing->writing, &head, storing->error);
}

int model_keeper_collect(struct model_store *store, const struct model *model,
                         const struct model_origin *origin, uint64_t learned,
                         struct model_store_writing **ret_writing, bool *ret_forgot,
                         struct store_error *error)
{
    struct storing storing = {.origin = origin, .learned = learned, .error = error};
    const struct model_sink sink = {.user = &storing,
                                    .forgotten = store_forgotten,
                                    .word = store_word,
                                    .cut_chunk = cut_chunk,
                                    .chunk = store_chunk,
                                    .tag = store_tag,
                                    .figures = store_figures,
                                    .delisted = remove_entry,
                                    .listed = store_entry,
                                    .totals = store_totals};
    int code = model_store_begin(store, &storing.writing, error);
    if (code != STORE_OK) {
        return code;
    }
    code = model_changes(model, &sink);
    if (code != STORE_OK) {
        model_store_abort(storing.writing);
        return error->code != STORE_OK ? code : store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    *ret_writing = storing.writing;
    *ret_forgot = storing.forgot;
    return STORE_OK;
}

int model_keeper_store(struct model_store *store, const struct model *model,
                       const struct model_origin *origin, uint64_t learned, bool *ret_forgot,
                       struct store_error *error)
{
    struct model_store_writing *writing = NULL;
    bool forgot = false;
    int code = model_keeper_collect(store, model, origin, learned, &writing, &forgot, error);
    if (code == STORE_OK) {
        code = model_store_commit(writing, error);
    }
    if (code == STORE_OK) {
        *ret_forgot = forgot;
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
