/*
 * trainer: the one thread that changes the model. It follows the changes in the store by their
 * seqs, learns each, and now and then stores the model, as of one seq.
 */
#ifndef UNDERTAG_TRAINER_H
#define UNDERTAG_TRAINER_H

#include <stdint.h>

#include "daemon/backlog.h"
#include "daemon/model_keeper.h"
#include "daemon/moment.h"
#include "daemon/rebuild.h"
#include "daemon/shared_model.h"
#include "daemon/troubles.h"
#include "daemon/workspace.h"
#include "storage/store.h"

struct trainer;

/* All borrowed for the trainer's life. */
struct trainer_settings {
    struct store *store;
    struct model_store *model_store;
    struct shared_model *shared;
    struct backlog *backlog;
    struct troubles *troubles;
    const struct features_settings *features;
    struct model_origin origin;
    struct rebuild *rebuild; /* a model that may take the place of this one; NULL: never */
    struct moments *moments; /* for those who copy store and model */
    struct options configured;
    uint64_t flush_every_ms;
    uint64_t flush_changes;
    double rehearsal_share;        /* of a core, for items learned again; 0: none */
    uint64_t memory_bytes;         /* for the whole process; see trainer.c */
    struct workspaces *workspaces; /* of those who ask, for what they take of it */
    void *user;
    void (*kept)(void *user); /* the stored model has moved on; trainer's thread */
};

/* Starts to learn. Returns 0 or a negative errno. */
int trainer_new(const struct trainer_settings *settings, struct trainer **ret_trainer)
    __attribute__((warn_unused_result));

/* Waits for the thread, which ends once the backlog says to stop, after it has stored the model. */
void trainer_free(struct trainer *trainer);

#endif
