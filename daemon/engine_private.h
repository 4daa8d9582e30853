/*
 * engine_private: the parts of an open home, for the files that are the engine together: engine
 * (opening and closing) and engine_serve (what the methods stand on).
 */
#ifndef UNDERTAG_ENGINE_PRIVATE_H
#define UNDERTAG_ENGINE_PRIVATE_H

#include <stdatomic.h>

#include "daemon/engine.h"
#include "daemon/learning_start.h"
#include "daemon/shared_model.h"
#include "daemon/trainer.h"

struct engine {
    struct options options;
    struct store_settings places;
    struct learning_start learning;    /* as it was found at the start */
    struct features_settings features; /* of the model, at the start */
    int lock_fd;
    struct store *store;
    struct model_store *model_store;
    struct shared_model shared;
    struct backlog *backlog;
    struct troubles troubles;
    struct workspaces workspaces;
    struct rebuild *rebuild;
    struct moments *moments;
    struct backup *backup;
    struct trainer *trainer;
    struct writer *writer;
    atomic_uint_fast64_t questions;
};

#endif
