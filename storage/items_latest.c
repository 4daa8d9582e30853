#include "storage/items_latest.h"

#include "storage/items_private.h"

int items_was_latest(struct store_view *view, struct store_text id, uint64_t seq, uint64_t moment,
                     struct item_buffer *buffer, bool *ret_was, struct store_error *error)
{
    struct id_entry entry;
    int result = items_entry(view, id, &entry, error);
    if (result == STORE_NOT_FOUND) {
        return store_fail(error, STORE_CORRUPT, "the id of change %llu is gone",
                          (unsigned long long)seq);
    }
    uint64_t latest = entry.seq;
    while (result == STORE_OK && latest > moment) {
        struct item_record record;
        result = items_read(view, latest, buffer, &record, error);
        if (result == STORE_NOT_FOUND) {
            return store_fail(error, STORE_CORRUPT, "the record of change %llu is gone",
                              (unsigned long long)latest);
        }
        if (result == STORE_OK && record.replaced >= latest) {
            return store_fail(error, STORE_CORRUPT, "the record of change %llu is damaged",
                              (unsigned long long)latest);
        }
        latest = result == STORE_OK ? record.replaced : 0;
    }
    if (result == STORE_OK) {
        *ret_was = latest == seq;
    }
    return result;
}
