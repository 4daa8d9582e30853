/*
 * model_base: the stored model as the base that the learner reads (base.h). The store is looked
 * into only when something is wanted that is not in memory; what is read then is of that moment,
 * until the base is left.
 *
 * Rules, so that a model and its base fit together: enter a base while the model's lock is held, or
 * on the one thread that changes the model; leave it before the lock is given back, and before the
 * model is told that something is stored (model_stored, model_clean).
 */
#ifndef UNDERTAG_MODEL_BASE_H
#define UNDERTAG_MODEL_BASE_H

#include "daemon/base.h"
#include "storage/model_view.h"

struct model_base {
    struct base base; /* for the learner */
    struct model_store *store;
    struct model_view *view;  /* NULL until something is wanted */
    struct store_error error; /* why something could not be read */
};

/* A base over a store, which stays the caller's. The base must not move: it refers to itself. */
void model_base_enter(struct model_base *base, struct model_store *store);
void model_base_leave(struct model_base *base);

/* The same over a view that is open, which stays the caller's: there is nothing to leave. */
void model_base_borrow(struct model_base *base, struct model_view *view);

#endif
