/*
 * model_store_next: a second model's store beside the one in use, in HOME/model.next, until it
 * takes its place.
 */
#ifndef UNDERTAG_MODEL_STORE_NEXT_H
#define UNDERTAG_MODEL_STORE_NEXT_H

#include "storage/model_store.h"

/* Opens or makes it. */
int model_store_open_next(const struct store_settings *settings, struct model_store **ret_store,
                          struct store_error *error) __attribute__((warn_unused_result));

/*
 * The next store's folder becomes HOME/model and that of the one in use HOME/model.next, at once:
 * whatever happens, each is whole and one of the two. Nobody else may use either meanwhile. It is
 * durable after model_store_settle. On failure nothing has changed.
 */
int model_store_exchange(struct model_store *used, struct model_store *next,
                         struct store_error *error) __attribute__((warn_unused_result));
int model_store_settle(const struct store_settings *settings, struct store_error *error)
    __attribute__((warn_unused_result));

/* Removes HOME/model.next, which nobody may have open; that there is none is no error. */
int model_store_remove_next(const struct store_settings *settings, struct store_error *error)
    __attribute__((warn_unused_result));

#endif
