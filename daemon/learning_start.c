#include "daemon/learning_start.h"

#include <string.h>

#include "daemon/log.h"

/* Whether the model in its place is the one that the notes say is being built: the daemon ended
 * between the exchange and the note of it. */
static bool has_taken_its_place(struct store *store, struct model_store *model_store,
                                const struct learning_choices *next)
{
    struct store_error error = {0};
    struct model_store_head head;
    return next->number > 0 && model_store_read_head(model_store, &head, &error) == STORE_OK &&
           memcmp(head.store_uuid, store_uuid(store), STORE_UUID_BYTES) == 0 &&
           learning_number_of(head.settings) == next->number;
}

static bool lay_over(struct learning_choices *choices, struct options *options, const char *what)
{
    char first[LEARNING_NAME_BYTES];
    size_t dropped = learning_lay_over(choices, options, first);
    if (dropped > 0) {
        log_line(LOG_NOTE, "the configuration of %s%s has changed since the rebuild, and rules %s",
                 first, dropped > 1 ? " and others" : "", what);
    }
    return dropped > 0;
}

static int read_notes(struct store *store, struct learning_notes *ret_notes,
                      struct store_error *error)
{
    int code = learning_notes_read(store, ret_notes, error);
    if (code == STORE_CORRUPT) {
        log_line(LOG_CAUTION, "%s: the configuration rules what is learned with", error->text);
        *error = (struct store_error){0};
        *ret_notes = (struct learning_notes){0};
        return STORE_OK;
    }
    return code;
}

int learning_start(struct store *store, struct model_store *model_store,
                   const struct options *configured, struct learning_start *ret_start,
                   struct store_error *error)
{
    struct learning_start start = {.used = *configured, .next = *configured};
    struct learning_notes *notes = &start.notes;
    int code = read_notes(store, notes, error);
    if (code != STORE_OK) {
        return code;
    }
    bool changed = has_taken_its_place(store, model_store, &notes->next);
    if (changed) {
        notes->used = notes->next;
        notes->next = (struct learning_choices){0};
    }
    changed |= lay_over(&notes->used, &start.used, "again");
    changed |= lay_over(&notes->next, &start.next, "in the one that is under way");
    struct store_error reason = {0};
    if (changed && learning_notes_write(store, notes, &reason) != STORE_OK) {
        log_line(LOG_CAUTION, "the settings of learning cannot be noted (%s)", reason.text);
    }
    if (learning_text(&start.used, notes->used.number, start.text, sizeof start.text) < 0) {
        return store_fail(error, STORE_DENIED,
                          "the settings of learning are too long to be stored");
    }
    *ret_start = start;
    return STORE_OK;
}
