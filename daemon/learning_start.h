/*
 * learning_start: which learning settings are in force when a home is opened, and whether a model
 * was being built.
 */
#ifndef UNDERTAG_LEARNING_START_H
#define UNDERTAG_LEARNING_START_H

#include "daemon/learning_notes.h"
#include "storage/model_store.h"

struct learning_start {
    struct options used;         /* as configured, with what is kept of a rebuild over it */
    struct options next;         /* likewise, of the model that was being built */
    struct learning_notes notes; /* notes.next.number 0: none was */
    char text[MODEL_STORE_SETTINGS_BYTES]; /* what the model in use must be known by */
};

/*
 * Finds out from the notes, the configuration and the model in HOME/model, and keeps what it found:
 * a rebuilt model that had just taken its place counts as taken; a choice that the configuration
 * has overtaken is forgotten. Notes that cannot be read or written are told in the log, and the
 * configuration rules.
 */
int learning_start(struct store *store, struct model_store *model_store,
                   const struct options *configured, struct learning_start *ret_start,
                   struct store_error *error) __attribute__((warn_unused_result));

#endif
