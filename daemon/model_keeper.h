/*
 * model_keeper: the learner's model into its store and back. It knows both sides' parts; neither
 * side knows the other.
 */
#ifndef UNDERTAG_MODEL_KEEPER_H
#define UNDERTAG_MODEL_KEEPER_H

#include <stdbool.h>
#include <stdint.h>

#include "daemon/learner/model.h"
#include "storage/model_view.h"

/* What a stored model must have been made from to be taken for ours. */
struct model_origin {
    const unsigned char *store_uuid; /* STORE_UUID_BYTES */
    const char *settings;            /* what it is learned with, as text */
    uint64_t last_seq;               /* of the store */
};

enum model_kept {
    MODEL_KEPT_NONE,  /* nothing is stored yet */
    MODEL_KEPT_OTHER, /* learned with other settings, or from another store: of no use */
    MODEL_KEPT_OURS
};

/*
 * Says what is stored, and up to which seq it has learned. STORE_CORRUPT where that is beyond the
 * last seq.
 */
int model_keeper_look(struct model_store *store, const struct model_origin *origin,
                      enum model_kept *ret_kept, uint64_t *ret_learned, struct store_error *error)
    __attribute__((warn_unused_result));

/* Restores into a new model what is to be in memory; the rest it reads through a model_base. */
int model_keeper_load(struct model_store *store, struct model *model, struct store_error *error)
    __attribute__((warn_unused_result));

/* The same as of a view; *ret_learned is the seq that it has learned up to. STORE_NOT_FOUND where
 * nothing is stored yet. */
int model_keeper_load_view(struct model_view *view, struct model *model, uint64_t *ret_learned,
                           struct store_error *error) __attribute__((warn_unused_result));

/* Forgets what is stored. */
int model_keeper_reset(struct model_store *store, struct store_error *error)
    __attribute__((warn_unused_result));

/*
 * Collects what has changed and is not stored, as of `learned`, to be committed with
 * model_store_commit. *ret_forgot says whether words were forgotten, which a scrub should follow.
 * Nobody may learn meanwhile; asking goes on. model_seal is the caller's, before anything else is
 * learned and under the model's lock, and model_stored once it is committed.
 */
int model_keeper_collect(struct model_store *store, const struct model *model,
                         const struct model_origin *origin, uint64_t learned,
                         struct model_store_writing **ret_writing, bool *ret_forgot,
                         struct store_error *error) __attribute__((warn_unused_result));

/* The same, and commits it; model_clean is the caller's, under the model's lock. */
int model_keeper_store(struct model_store *store, const struct model *model,
                       const struct model_origin *origin, uint64_t learned, bool *ret_forgot,
                       struct store_error *error) __attribute__((warn_unused_result));

#endif
