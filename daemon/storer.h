/*
 * storer: a thread that commits what the trainer has collected of the model, while the trainer goes
 * on learning. One writing at a time.
 */
#ifndef UNDERTAG_STORER_H
#define UNDERTAG_STORER_H

#include <stdbool.h>
#include <stdint.h>

#include "daemon/backlog.h"
#include "storage/model_store.h"

struct storer;

/* Nudges whoever waits for work in the backlog, which is not owned, when something is committed. */
int storer_new(struct backlog *backlog, struct storer **ret_storer)
    __attribute__((warn_unused_result));

/* Waits for what is under way. */
void storer_free(struct storer *storer);

/* Begins to commit; the writing is the storer's from here on. Nothing may be under way, and what
 * was, must have been taken with storer_take. */
void storer_begin(struct storer *storer, struct model_store_writing *writing);

struct storer_result {
    int code; /* a store_code */
    struct store_error error;
    uint64_t took_us;
};

/* What became of what was begun: waits for it if `waits`. False where nothing was begun, or it is
 * under way. */
bool storer_take(struct storer *storer, bool waits, struct storer_result *ret_result);

#endif
