#include "daemon/model_base.h"

#include <errno.h>

#include "daemon/learner/worklist.h"

/* What the learner is told; why is kept in base->error. */
static int tell(const struct model_base *base, int code)
{
    if (code == STORE_OK) {
        return 0;
    }
    if (code == STORE_NOT_FOUND) {
        return -ENOENT;
    }
    return base->error.code == STORE_NO_MEMORY ? -ENOMEM : -EIO;
}

static int need_view(struct model_base *base)
{
    return base->view ? STORE_OK : model_view_open(base->store, &base->view, &base->error);
}

static int read_chunk(void *user, uint32_t word, uint32_t number, struct base_bytes *ret_bytes)
{
    struct model_base *base = user;
    struct kv_bytes bytes = {0};
    int code = need_view(base);
    if (code == STORE_OK) {
        code = model_view_chunk(base->view, word, number, &bytes, &base->error);
    }
    if (code == STORE_OK) {
        *ret_bytes = (struct base_bytes){.data = bytes.data, .size = bytes.size};
    }
    return tell(base, code);
}

static int read_word(void *user, const char *term, size_t term_bytes, struct base_word *ret_word)
{
    struct model_base *base = user;
    struct model_store_word word = {0};
    int code = need_view(base);
    if (code == STORE_OK) {
        code = model_view_word(base->view, term, term_bytes, &word, &base->error);
    }
    if (code == STORE_OK) {
        *ret_word = (struct base_word){.number = word.number, .count = word.count};
    }
    return tell(base, code);
}

/* An entry as the learner has it; -EIO where it cannot be one. */
static int take_entry(struct model_base *base, const struct model_store_entry *entry,
                      struct worklist_entry *ret_entry)
{
    if (entry->gaps.count > WORKLIST_GAPS || entry->pairs.count > WORKLIST_GAPS) {
        return tell(base, store_fail(&base->error, STORE_CORRUPT,
                                     "a stored entry of the model is damaged"));
    }
    struct worklist_entry taken = {.number = entry->number,
                                   .scored = entry->scored,
                                   .counted = entry->counted,
                                   .promise = entry->promise,
                                   .gap_count = entry->gaps.count,
                                   .pair_count = entry->pairs.count};
    for (uint32_t i = 0; i < taken.gap_count; i++) {
        taken.gaps[i] =
            (struct worklist_gap){.tag = entry->gaps.tags[i], .score = entry->gaps.values[i]};
    }
    for (uint32_t i = 0; i < taken.pair_count; i++) {
        const float *values = entry->pairs.values + (size_t)i * MODEL_STORE_PAIR_VALUES;
        taken.pairs[i] = (struct worklist_pair){
            .tag = entry->pairs.tags[i], .counted = values[0], .own = values[1]};
    }
    *ret_entry = taken;
    return 0;
}

static int read_entry(void *user, uint64_t number, struct worklist_entry *ret_entry)
{
    struct model_base *base = user;
    struct model_store_entry entry;
    int code = need_view(base);
    if (code == STORE_OK) {
        code = model_view_entry(base->view, number, &entry, &base->error);
    }
    return code == STORE_OK ? take_entry(base, &entry, ret_entry) : tell(base, code);
}

static int read_entry_after(void *user, uint64_t number, struct worklist_entry *ret_entry)
{
    struct model_base *base = user;
    struct model_store_entry entry;
    int code = need_view(base);
    if (code == STORE_OK) {
        code = model_view_entry_after(base->view, number, &entry, &base->error);
    }
    return code == STORE_OK ? take_entry(base, &entry, ret_entry) : tell(base, code);
}

void model_base_enter(struct model_base *base, struct model_store *store)
{
    *base = (struct model_base){.base = {.user = base,
                                         .chunk = read_chunk,
                                         .word = read_word,
                                         .entry = read_entry,
                                         .entry_after = read_entry_after},
                                .store = store};
}

void model_base_leave(struct model_base *base)
{
    model_view_close(base->view);
    base->view = NULL;
}

void model_base_borrow(struct model_base *base, struct model_view *view)
{
    model_base_enter(base, NULL);
    base->view = view;
}
