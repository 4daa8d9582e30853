#include "daemon/snapshot/snapshot_items.h"

#include <errno.h>
#include <stdlib.h>

#include "daemon/answer.h"
#include "daemon/item_json.h"
#include "daemon/snapshot/snapshot_said.h"
#include "storage/vocabulary.h"

/* --- items.jsonl --------------------------------------------------------------------------------
 */

struct items {
    struct snapshot_file file;
    struct store_view *view;
    struct snapshot_opened opened;
    struct item_buffer buffer; /* of the walk */
};

static int add_item(void *user, const struct item_record *record)
{
    struct items *items = user;
    if (item_is_withdrawn(record)) {
        return STORE_OK;
    }
    json_t *line = snapshot_said(&items->opened, items->view, record, items->file.error);
    if (!line && items->file.error->code != STORE_OK) {
        return items->file.error->code;
    }
    return snapshot_file_add(&items->file, line);
}

int snapshot_items_write(struct export_part *part, struct store_view *view, struct pace *pace,
                         struct store_error *error)
{
    struct items items = {.view = view};
    uint64_t next = 0;
    int code = snapshot_file_create(part, "items.jsonl", pace, error, &items.file);
    if (code != STORE_OK) {
        return code;
    }
    code = snapshot_opened_init(&items.opened, view) == 0
               ? items_changed(view, 0, SIZE_MAX, add_item, &items, &items.buffer, &next, error)
               : (int)store_fail(error, STORE_NO_MEMORY, "there is no memory for a snapshot");
    snapshot_opened_deinit(&items.opened);
    item_buffer_deinit(&items.buffer);
    return snapshot_file_close(&items.file, code);
}

/* --- proposals.jsonl ----------------------------------------------------------------------------
 */

struct proposals {
    struct snapshot_file file;
    struct store_view *view;
    const struct model *model;
    double floor;
    struct item_buffer buffer;
};

struct proposed {
    uint32_t tag;
    double chance;
};

static int compare_proposed(const void *left, const void *right)
{
    const struct proposed *a = left;
    const struct proposed *b = right;
    if (a->chance != b->chance) {
        return a->chance > b->chance ? -1 : 1;
    }
    return (a->tag > b->tag) - (a->tag < b->tag);
}

/* The entry's gaps above the floor, the likeliest first. */
static size_t choose(const struct proposals *proposals, const struct worklist_entry *entry,
                     struct proposed chosen[WORKLIST_GAPS])
{
    size_t count = 0;
    for (uint32_t i = 0; i < entry->gap_count; i++) {
        double chance = model_gap_chance(proposals->model, entry, &entry->gaps[i]);
        if (chance > 0.0 && chance >= proposals->floor) {
            chosen[count++] = (struct proposed){.tag = entry->gaps[i].tag, .chance = chance};
        }
    }
    if (count > 1) {
        qsort(chosen, count, sizeof *chosen, compare_proposed);
    }
    return count;
}

static int add_proposals(struct proposals *proposals, uint64_t number,
                         const struct proposed *chosen, size_t count)
{
    struct store_error *error = proposals->file.error;
    struct item_record record;
    struct vocabulary_tag tag;
    double expected = 0.0;
    json_t *gaps = json_array();
    int code = items_read(proposals->view, number, &proposals->buffer, &record, error);
    for (size_t i = 0; i < count && code == STORE_OK; i++) {
        code = vocabulary_get(proposals->view, chosen[i].tag, &tag, error);
        if (code == STORE_OK) {
            answer_append(&gaps,
                          json_pack("{s:s, s:f}", "tag", tag.name, "chance", chosen[i].chance));
            expected += chosen[i].chance;
        }
    }
    if (code != STORE_OK) {
        json_decref(gaps);
        return code == STORE_NOT_FOUND
                   ? (int)store_fail(error, STORE_CORRUPT,
                                     "the worklist has item %llu, which the store does not have",
                                     (unsigned long long)number)
                   : code;
    }
    json_t *line = json_object();
    answer_add(&line, "id", item_text_json(record.id));
    answer_add(&line, "seq", answer_count(number));
    answer_add(&line, "gaps", gaps);
    answer_add(&line, "expected", answer_number(expected));
    return snapshot_file_add(&proposals->file, line);
}

/* Goes through the worklist's entries as they are stored. */
static int walk(struct proposals *proposals, const struct base *base)
{
    struct worklist_entry entry = {0};
    struct proposed chosen[WORKLIST_GAPS];
    int result = 0;
    int code = STORE_OK;
    while (code == STORE_OK &&
           (result = model_entry_after(proposals->model, base, entry.number, &entry)) == 0) {
        size_t count = choose(proposals, &entry, chosen);
        code = count > 0 ? add_proposals(proposals, entry.number, chosen, count) : STORE_OK;
    }
    if (code != STORE_OK || result == -ENOENT) {
        return code;
    }
    return store_fail(proposals->file.error, result == -ENOMEM ? STORE_NO_MEMORY : STORE_CORRUPT,
                      "the stored worklist cannot be read");
}

int snapshot_proposals_write(struct export_part *part, struct store_view *view,
                             const struct model *model, const struct base *base, double floor,
                             struct pace *pace, struct store_error *error)
{
    struct proposals proposals = {.view = view, .model = model, .floor = floor};
    int code = snapshot_file_create(part, "proposals.jsonl", pace, error, &proposals.file);
    if (code != STORE_OK) {
        return code;
    }
    code = walk(&proposals, base);
    item_buffer_deinit(&proposals.buffer);
    return snapshot_file_close(&proposals.file, code);
}
