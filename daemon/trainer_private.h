/*
 * trainer_private: the trainer's own insides, for the files that are it together: trainer (changes,
 * the thread), trainer_storing (the model into its store), trainer_moment (both stores as of one
 * change) and trainer_idle (what is done while there is nothing to learn).
 */
#ifndef UNDERTAG_TRAINER_PRIVATE_H
#define UNDERTAG_TRAINER_PRIVATE_H

#include <pthread.h>

#include "daemon/change_reader.h"
#include "daemon/memory_shares.h"
#include "daemon/model_base.h"
#include "daemon/storer.h"
#include "daemon/trainer.h"

struct trainer {
    struct trainer_settings settings;
    char text[MODEL_STORE_SETTINGS_BYTES]; /* the origin's, once the model is a rebuilt one */
    pthread_t thread;
    struct storer *storer;
    struct change_reader *reader;
    struct model_scratch *scratch;
    struct model_base base; /* entered for a round */
    struct memory_shares shares;
    uint64_t learned; /* this thread's own copy */
    uint64_t kept;    /* the seq of the stored model */
    uint64_t sealed;  /* of what is being stored, if anything is */
    bool is_storing;
    bool forgot;           /* words, with what is being stored */
    uint64_t sealed_at_us; /* when storing was begun, or tried, last */
    uint64_t storing_us;   /* how long that took last */
    bool rescore_due;      /* the model has changed since there was nothing to score again */
    bool idly_changed;     /* by scoring again or rehearsal, since the model was stored */
    bool rehearse_due;
    uint64_t rest_until_us; /* rehearsal takes no more than its share */
    bool scrub_due;
    uint64_t scrub_wait_ms; /* before it is gone on with */
    size_t scrub_left;      /* pages, when it was last looked at */
    struct moment moment;   /* being made, where its store is there */
    bool moment_is_sealed;
    bool failed;
    bool store_failed; /* when the model was to be stored last */
    bool waits;        /* until it can be stored */
    bool is_damaged;   /* what is stored of the model */
};

/* Opens what a round reads. The model and its store fit together until trainer_end_round. */
int trainer_begin_round(struct trainer *trainer, struct store_view **ret_view,
                        struct store_error *error) __attribute__((warn_unused_result));
void trainer_end_round(struct trainer *trainer, struct store_view *view);

/* Begins to store the model where that is due; it is stored while this thread goes on. */
void trainer_store_if_due(struct trainer *trainer);

/* The same, due or not, while nothing is being stored. Where that fails it is told. */
void trainer_begin_storing(struct trainer *trainer);

/* Takes note of what has been stored; waits for what is being stored if `waits`. No round may be
 * open. */
void trainer_end_storing(struct trainer *trainer, bool waits);

/* Stores, before the end, what was learned last. */
void trainer_store_last(struct trainer *trainer);

/* Whether the model must be stored before more is learned. */
bool trainer_is_full(const struct trainer *trainer);

/* Makes a moment where one is wanted, a step at a time; between two rounds. */
void trainer_make_moment(struct trainer *trainer);

/* Gives up the one that is being made. */
void trainer_drop_moment(struct trainer *trainer);

/* Whether one is being made and not all of it learned yet; and what to learn up to then. */
bool trainer_nears_moment(const struct trainer *trainer);
uint64_t trainer_bound(const struct trainer *trainer, uint64_t last);

/* The error that the learner's code is, at a change or an item; notes damage. */
int trainer_fail_to_learn(struct trainer *trainer, int code, uint64_t seq,
                          struct store_error *error);

/* Learning has ended, until a restart. */
void trainer_fail(struct trainer *trainer, const struct store_error *error);

/* Does a little of what can be done while there is nothing to learn (`is_idle`); anything learned
 * makes all of it due. */
void trainer_work_idly(struct trainer *trainer, bool is_idle);

#endif
