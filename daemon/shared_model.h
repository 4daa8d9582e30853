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
    struct model_store
        *store;       /* where the model is kept, and read from by a model_base; borrowed */
    uint64_t version; /* rises when another model takes the place */
    uint64_t learned; /* the seq that the model has learned up to */
    int broken;       /* 0, or why it must not be asked any more: half a change, or damage */
    pthread_rwlock_t lock;
};

/* Takes the model, also on failure; the store stays the caller's. */
int shared_model_init_take(struct shared_model *shared, struct model *model,
                           struct model_store *store, uint64_t learned)
    __attribute__((warn_unused_result));
void shared_model_deinit(struct shared_model *shared);

/* Another model, which has learned as far, takes the place; under shared_model_write. The old one
 * and its store come back in the same pointers, and are the caller's. */
void shared_model_exchange(struct shared_model *shared, struct model **model,
                           struct model_store **store);

void shared_model_read(struct shared_model *shared);
void shared_model_write(struct shared_model *shared);
void shared_model_unlock(struct shared_model *shared);

#endif
