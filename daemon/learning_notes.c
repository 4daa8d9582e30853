#include "daemon/learning_notes.h"

#include "storage/store_notes.h"

static const char USED[] = "learning";
static const char NEXT[] = "rebuild";

static int read_one(struct store_view *view, const char *name, struct codec_writer *bytes,
                    struct learning_choices *ret_choices, struct store_error *error)
{
    int result = store_get_note(view, name, bytes, error);
    if (result == STORE_NOT_FOUND) {
        *ret_choices = (struct learning_choices){0};
        return STORE_OK;
    }
    if (result != STORE_OK) {
        return result;
    }
    struct codec_reader reader = {.data = bytes->data, .size = bytes->size};
    return learning_choices_get(&reader, ret_choices) == 0
               ? STORE_OK
               : (int)store_fail(error, STORE_CORRUPT, "the store's note '%s' cannot be read",
                                 name);
}

int learning_notes_read(struct store *store, struct learning_notes *ret_notes,
                        struct store_error *error)
{
    struct store_view *view = NULL;
    struct learning_notes notes;
    struct codec_writer bytes = {0};
    int result = store_read(store, &view, error);
    if (result != STORE_OK) {
        return result;
    }
    result = read_one(view, USED, &bytes, &notes.used, error);
    if (result == STORE_OK) {
        result = read_one(view, NEXT, &bytes, &notes.next, error);
    }
    if (result == STORE_OK) {
        *ret_notes = notes;
    }
    codec_deinit(&bytes);
    store_end(view);
    return result;
}

static int write_one(struct store_view *view, const char *name,
                     const struct learning_choices *choices, struct codec_writer *bytes,
                     struct store_error *error)
{
    codec_reset(bytes);
    learning_choices_put(choices, bytes);
    return bytes->failed ? (int)store_fail(error, STORE_NO_MEMORY, "out of memory")
                         : store_put_note(view, name, bytes->data, bytes->size, error);
}

int learning_notes_write(struct store *store, const struct learning_notes *notes,
                         struct store_error *error)
{
    struct store_view *view = NULL;
    struct codec_writer bytes = {0};
    int result = store_write(store, &view, error);
    if (result != STORE_OK) {
        return result;
    }
    result = write_one(view, USED, &notes->used, &bytes, error);
    if (result == STORE_OK) {
        result = write_one(view, NEXT, &notes->next, &bytes, error);
    }
    codec_deinit(&bytes);
    if (result != STORE_OK) {
        store_end(view);
        return result;
    }
    return store_commit(view, error);
}
