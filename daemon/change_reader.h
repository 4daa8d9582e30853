/*
 * change_reader: a change in the store as the learner takes it: what the item is now, and what it
 * was. Each thread that learns has a reader of its own.
 */
#ifndef UNDERTAG_CHANGE_READER_H
#define UNDERTAG_CHANGE_READER_H

#include <stdint.h>

#include "daemon/learner/model.h"
#include "storage/store.h"

struct change_reader;

/* Valid until the reader is used again. */
struct change_read {
    const struct model_item *item;     /* NULL: withdrawn, or superseded and passed by the model */
    const struct model_item *replaced; /* NULL: nothing, or nothing that the model knows of */
    uint64_t cost;                     /* see backlog_cost */
};

/* The settings are copied. Returns 0 or -ENOMEM. */
int change_reader_new(const struct features_settings *settings, struct change_reader **ret_reader)
    __attribute__((warn_unused_result));
void change_reader_free(struct change_reader *reader); /* NULL is passed over */

/* Reads a change and takes out its words. */
int change_reader_read(struct change_reader *reader, struct store_view *view, uint64_t seq,
                       struct change_read *ret_read, struct store_error *error)
    __attribute__((warn_unused_result));

/*
 * The same for a model that is learned anew from the items as they were at the change `moment`: up
 * to there, each item is met at its latest change and takes the place of nothing; what had been
 * superseded by then is passed over, whether it has been erased or not.
 */
int change_reader_read_anew(struct change_reader *reader, struct store_view *view, uint64_t seq,
                            uint64_t moment, struct change_read *ret_read,
                            struct store_error *error) __attribute__((warn_unused_result));

/* Reads an item by its seq; NULL where it is one no more. */
int change_reader_item(struct change_reader *reader, struct store_view *view, uint64_t seq,
                       const struct model_item **ret_item, struct store_error *error)
    __attribute__((warn_unused_result));

#endif
