/*
 * learning_notes: the choices behind the model in use, and those behind the one that is being
 * built, kept in the store.
 */
#ifndef UNDERTAG_LEARNING_NOTES_H
#define UNDERTAG_LEARNING_NOTES_H

#include "daemon/learning_choices.h"
#include "storage/store.h"

/* `next.number` is 0 while nothing is being built. */
struct learning_notes {
    struct learning_choices used;
    struct learning_choices next;
};

/* Zeros where nothing has been kept yet; STORE_CORRUPT where it cannot be read. */
int learning_notes_read(struct store *store, struct learning_notes *ret_notes,
                        struct store_error *error) __attribute__((warn_unused_result));

/* Keeps both, or changes nothing. Durable on return. */
int learning_notes_write(struct store *store, const struct learning_notes *notes,
                         struct store_error *error) __attribute__((warn_unused_result));

#endif
