#include "daemon/snapshot/snapshot_tags.h"

#include "daemon/answer.h"
#include "daemon/tag_json.h"

struct writing {
    struct snapshot_file file;
    struct outlook outlook;
    const struct model *model;
    uint64_t known; /* tags of the model */
    uint64_t written;
};

/* A tag that nobody has used yet is in the store and not in the model: it has no row. */
static int add_tag(void *user, const struct vocabulary_tag *tag)
{
    struct writing *writing = user;
    if (writing->written == writing->known) {
        return STORE_OK;
    }
    if (tag->number != writing->written) {
        return store_fail(writing->file.error, STORE_CORRUPT, "tag %llu is not in the store",
                          (unsigned long long)writing->written);
    }
    writing->written++;
    json_t *line = tag_json(&writing->outlook, tag);
    answer_add(&line, "bias", answer_number(model_bias(writing->model, tag->number)));
    answer_add(&line, "p_allowed",
               answer_number(model_tag_allowed_propensity(writing->model, tag->number)));
    return snapshot_file_add(&writing->file, line);
}

int snapshot_tags_write(struct export_part *part, struct store_view *view,
                        const struct model *model, struct pace *pace, struct store_error *error)
{
    struct writing writing = {.model = model};
    struct store_totals totals = store_view_totals(view);
    struct model_size size;
    model_measure(model, &size);
    writing.known = size.tags;
    outlook_of_model(model, totals.items, totals.seq, &writing.outlook);
    int code = snapshot_file_create(part, "tags.jsonl", pace, error, &writing.file);
    if (code != STORE_OK) {
        return code;
    }
    code = vocabulary_by_number(view, add_tag, &writing, error);
    if (code == STORE_OK && writing.written < writing.known) {
        code = store_fail(error, STORE_CORRUPT, "the model knows tags that are not in the store");
    }
    return snapshot_file_close(&writing.file, code);
}
