#include "daemon/backup_look.h"

#include <string.h>

#include "storage/model_store.h"
#include "storage/store.h"

static int look_at_store(struct store *store, struct backup_found *found, struct store_error *error)
{
    struct store_view *view = NULL;
    if (store_read(store, &view, error) != STORE_OK) {
        return error->code;
    }
    struct store_totals totals = store_view_totals(view);
    store_end(view);
    found->seq = totals.seq;
    found->items = totals.items;
    return STORE_OK;
}

/* A model that was stored in an older format is nobody's, and will be learned again. */
static bool is_nobodys(const struct model_store_head *head)
{
    static const unsigned char NOBODY[STORE_UUID_BYTES];
    return memcmp(head->store_uuid, NOBODY, sizeof NOBODY) == 0;
}

static int look_at_model(struct model_store *model, const struct store *store,
                         struct backup_found *found, struct store_error *error)
{
    struct model_store_head head = {0};
    int code = model_store_read_head(model, &head, error);
    if (code == STORE_NOT_FOUND) {
        return STORE_OK; /* none has been stored yet */
    }
    if (code != STORE_OK) {
        return code;
    }
    found->learned = head.learned;
    if (!is_nobodys(&head) && memcmp(head.store_uuid, store_uuid(store), STORE_UUID_BYTES) != 0) {
        return store_fail(error, STORE_CORRUPT, "the model was not learned from this store");
    }
    if (head.learned > found->seq) {
        return store_fail(error, STORE_CORRUPT,
                          "the model has learned up to change %llu, but the store ends at %llu",
                          (unsigned long long)head.learned, (unsigned long long)found->seq);
    }
    return STORE_OK;
}

int backup_look(const char *folder, size_t map_bytes, struct backup_found *ret_found,
                struct store_error *error)
{
    const struct store_settings settings = {
        .home = folder, .map_bytes = map_bytes, .read_only = true, .is_alone = true};
    struct backup_found found = {0};
    struct store *store = NULL;
    struct model_store *model = NULL;
    int code = store_open(&settings, &store, error);
    if (code == STORE_OK) {
        code = look_at_store(store, &found, error);
    }
    if (code == STORE_OK) {
        code = model_store_open(&settings, &model, error);
    }
    if (code == STORE_OK) {
        code = look_at_model(model, store, &found, error);
    }
    model_store_close(model);
    store_close(store);
    if (code == STORE_OK) {
        *ret_found = found;
    }
    return code;
}
