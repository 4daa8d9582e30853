/*
 * shared_model: the model behind a lock: one learns, many ask.
 */
#ifndef UNDERTAG_SHARED_MODEL_H
#define UNDERTAG_SHARED_MODEL_H

#include <pthread.h>
#include <stdbool.h>
#include <stdint.h>

#include "daemon/learner/model.h"
#include "storage/model_store.h"

/* The model may be asked under shared_model_read, changed under shared_model_write. */
struct shared_model {
    struct model *model;
    struct model_store *store; /* what the model reads through a model_base */
    uint64_t learned;          /* the seq that the model has learned up to */
    bool broken;               /* a change was learned by half: it must not be asked any more */
    pthread_rwlock_t lock;
};

/* Takes the model, also on failure; the store stays the caller's. */
int shared_model_init_take(struct shared_model *shared, struct model *model,
                           struct model_store *store, uint64_t learned)
    __attribute__((warn_unused_result));
void shared_model_deinit(struct shared_model *shared);

void shared_model_read(struct shared_model *shared);
void shared_model_write(struct shared_model *shared);
void shared_model_unlock(struct shared_model *shared);

#endif
