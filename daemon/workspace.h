/*
 * workspace: what one thread needs to read items and to ask the model, kept for the next that
 * comes.
 */
#ifndef UNDERTAG_WORKSPACE_H
#define UNDERTAG_WORKSPACE_H

#include <pthread.h>

#include "daemon/item_source.h"
#include "daemon/learner/model.h"
#include "storage/items.h"

enum {
    WORKSPACE_LANGUAGE_BYTES = 16
};

struct workspace {
    struct workspace *next;
    uint64_t version; /* of the words that it takes out */
    uint64_t bytes;   /* of the scratch, when it was returned last */
    struct features *features;
    struct model_scratch *scratch;
    struct item_buffer buffer;
    struct item_record record; /* what was last read into the buffer */
    struct item_source source;
    struct field_list fields;
};

/* Those that nobody uses. */
struct workspaces {
    pthread_mutex_t mutex;
    struct workspace *free;
    uint64_t bytes; /* of all, borrowed ones too */
    struct features_settings settings;
    char language[WORKSPACE_LANGUAGE_BYTES]; /* of the settings */
    uint64_t version;                        /* of the settings, from 0 */
};

/* The settings are copied. */
int workspaces_init(struct workspaces *workspaces, const struct features_settings *settings)
    __attribute__((warn_unused_result));

/* Other words are taken out in what is borrowed from now on. Any thread. */
void workspaces_use(struct workspaces *workspaces, const struct features_settings *settings);

/* All must have been returned. */
void workspaces_deinit(struct workspaces *workspaces);

/* One to be used until it is returned. Any thread. NULL: no memory. */
struct workspace *workspaces_borrow(struct workspaces *workspaces);
void workspaces_return(struct workspaces *workspaces, struct workspace *workspace);

/* What all of them hold for asking the model. Any thread. */
uint64_t workspaces_bytes(struct workspaces *workspaces);

#endif
