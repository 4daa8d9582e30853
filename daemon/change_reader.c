#include "daemon/change_reader.h"

#include <errno.h>
#include <stdbool.h>
#include <stdlib.h>

#include "daemon/backlog.h"
#include "daemon/grow.h"
#include "daemon/item_source.h"
#include "storage/items_latest.h"

/* One of the two items that a change is about. */
struct side {
    struct item_buffer buffer;
    struct item_record record;
    struct item_source source;
    struct features *features;
    struct model_trial *trials;
    size_t trial_capacity;
    struct model_item item;
};

struct change_reader {
    struct side filed;
    struct side replaced;
};

/* --- one side -----------------------------------------------------------------------------------
 */

/* Looks at whether what belongs was given: a whole one after a check at random, halves where there
 * are second taggers. */
static size_t list_trials(const struct item_record *record, struct model_trial *into)
{
    enum {
        WHOLE = 2,
        HALF = 1
    };
    size_t count = 0;
    const struct item_check *check = &record->check;
    for (size_t i = 0; check->is_random && i < check->given.count; i++) {
        into[count++] = (struct model_trial){check->given.list[i], WHOLE, WHOLE};
    }
    for (size_t i = 0; check->is_random && i < check->hidden.count; i++) {
        into[count++] = (struct model_trial){check->hidden.list[i], WHOLE, 0};
    }
    for (size_t i = 0; i < record->second_count; i++) {
        struct numbers tags = record->seconds[i].tags;
        for (size_t j = 0; j < tags.count; j++) {
            bool was_given = numbers_hold(record->filed, tags.list[j]) &&
                             !numbers_hold(record->prompted, tags.list[j]);
            into[count++] = (struct model_trial){tags.list[j], HALF, was_given ? HALF : 0};
        }
    }
    return count;
}

static size_t most_trials(const struct item_record *record)
{
    size_t most = record->check.given.count + record->check.hidden.count;
    for (size_t i = 0; i < record->second_count; i++) {
        most += record->seconds[i].tags.count;
    }
    return most;
}

/* The item as the learner takes it, of the record and the features. */
static int fill_item(struct side *side, struct store_error *error)
{
    const struct item_record *record = &side->record;
    if (GROW(&side->trials, &side->trial_capacity, most_trials(record)) < 0) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    /* A check goes through the tags of its day; those opened later are as before. */
    bool is_checked = record->check.is_there;
    side->item = (struct model_item){.number = record->seq,
                                     .features = features_list(side->features),
                                     .feature_count = features_count(side->features),
                                     .tags = record->tags.list,
                                     .tag_count = record->tags.count,
                                     .examined = record->examined.list,
                                     .examined_count = record->examined.count,
                                     .known_not = record->known_not.list,
                                     .known_not_count = record->known_not.count,
                                     .checked_below = is_checked ? record->check.vocabulary : 0,
                                     .same_words = record->change != ITEM_FILED,
                                     .trials = side->trials,
                                     .trial_count = list_trials(record, side->trials)};
    return STORE_OK;
}

/* Reads a record; *ret_found says whether it is there, and an item. */
static int read_record(struct side *side, struct store_view *view, uint64_t seq, bool *ret_found,
                       struct store_error *error)
{
    side->record = (struct item_record){0};
    int code = items_read(view, seq, &side->buffer, &side->record, error);
    if (code == STORE_NOT_FOUND) {
        *error = (struct store_error){0}; /* superseded, and passed before */
        *ret_found = false;
        return STORE_OK;
    }
    if (code == STORE_OK) {
        *ret_found = !item_is_withdrawn(&side->record);
    }
    return code;
}

/* Takes out the words of the record. */
static int take_out_words(struct side *side, struct store_error *error)
{
    int code = item_source_fill(&side->source, &side->record);
    if (code == 0) {
        code = features_extract(side->features, &side->source.source, SIZE_MAX);
    }
    if (code != 0) {
        return store_fail(error, code == -ENOMEM ? STORE_NO_MEMORY : STORE_CORRUPT,
                          "the words of change %llu cannot be taken out",
                          (unsigned long long)side->record.seq);
    }
    return fill_item(side, error);
}

/* *ret_item is NULL where there is no item. */
static int read_side(struct side *side, struct store_view *view, uint64_t seq,
                     const struct model_item **ret_item, struct store_error *error)
{
    bool is_found = false;
    int code = read_record(side, view, seq, &is_found, error);
    if (code == STORE_OK && is_found) {
        code = take_out_words(side, error);
    }
    if (code == STORE_OK) {
        *ret_item = is_found ? &side->item : NULL;
    }
    return code;
}

/* --- a change -----------------------------------------------------------------------------------
 */

static uint64_t cost_of(const struct item_record *record)
{
    return backlog_cost(record->title.size + record->text.size, record->filed.count);
}

int change_reader_read(struct change_reader *reader, struct store_view *view, uint64_t seq,
                       struct change_read *ret_read, struct store_error *error)
{
    struct change_read read = {0};
    int code = read_side(&reader->filed, view, seq, &read.item, error);
    if (code == STORE_OK && reader->filed.record.replaced > 0) {
        code = read_side(&reader->replaced, view, reader->filed.record.replaced, &read.replaced,
                         error);
    }
    if (code == STORE_OK) {
        read.cost = cost_of(&reader->filed.record);
        *ret_read = read;
    }
    return code;
}

int change_reader_read_anew(struct change_reader *reader, struct store_view *view, uint64_t seq,
                            uint64_t moment, struct change_read *ret_read,
                            struct store_error *error)
{
    if (seq > moment) {
        return change_reader_read(reader, view, seq, ret_read, error);
    }
    struct side *side = &reader->filed;
    bool is_met = false;
    int code = read_record(side, view, seq, &is_met, error);
    if (code == STORE_OK && is_met) {
        code = items_was_latest(view, side->record.id, seq, moment, &reader->replaced.buffer,
                                &is_met, error);
    }
    if (code == STORE_OK && is_met) {
        code = take_out_words(side, error);
    }
    if (code == STORE_OK) {
        *ret_read = (struct change_read){.item = is_met ? &side->item : NULL,
                                         .cost = cost_of(&side->record)};
    }
    return code;
}

int change_reader_item(struct change_reader *reader, struct store_view *view, uint64_t seq,
                       const struct model_item **ret_item, struct store_error *error)
{
    return read_side(&reader->filed, view, seq, ret_item, error);
}

/* --- life ---------------------------------------------------------------------------------------
 */

static void side_deinit(struct side *side)
{
    item_buffer_deinit(&side->buffer);
    item_source_deinit(&side->source);
    features_free(side->features);
    free(side->trials);
}

int change_reader_new(const struct features_settings *settings, struct change_reader **ret_reader)
{
    struct change_reader *reader = calloc(1, sizeof *reader);
    if (!reader) {
        return -ENOMEM;
    }
    if (features_new(settings, &reader->filed.features) < 0 ||
        features_new(settings, &reader->replaced.features) < 0) {
        change_reader_free(reader);
        return -ENOMEM;
    }
    *ret_reader = reader;
    return 0;
}

void change_reader_free(struct change_reader *reader)
{
    if (reader) {
        side_deinit(&reader->filed);
        side_deinit(&reader->replaced);
        free(reader);
    }
}
