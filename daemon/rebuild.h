/*
 * rebuild: has a model built from the stored items, with other settings of learning, on a thread of
 * its own beside the one in use, and has it take that one's place. At most one at a time.
 */
#ifndef UNDERTAG_REBUILD_H
#define UNDERTAG_REBUILD_H

#include <stdbool.h>
#include <stdint.h>

#include "daemon/backlog.h"
#include "daemon/change_reader.h"
#include "daemon/learning_start.h"
#include "daemon/shared_model.h"
#include "daemon/troubles.h"

struct rebuild;

enum {
    REBUILD_MEMORY_PART = 4 /* of the memory budget, a quarter is for what is built */
};

/* Pointers are borrowed for the rebuild's life. */
struct rebuild_settings {
    struct store *store;
    struct store_settings places; /* the home of the models' stores */
    struct backlog *backlog;
    struct troubles *troubles;
    struct siphash_key key;
    struct options configured;
    struct learning_start start; /* one that was being built is held, until rebuild_resume */
    void *user;
    /* Other words are taken out from now on; under shared_model_write, trainer's thread. */
    void (*words)(void *user, const struct features_settings *words);
    /* More may be erased; any thread. */
    void (*let_go)(void *user);
};

/* Returns 0 or a negative errno. */
int rebuild_new(const struct rebuild_settings *settings, struct rebuild **ret_rebuild)
    __attribute__((warn_unused_result));

/* Goes on with what was being built at the start. Returns 0 or a negative errno. */
int rebuild_resume(struct rebuild *rebuild) __attribute__((warn_unused_result));

/* No model takes another's place any more, but for one that is just doing so. */
void rebuild_stop(struct rebuild *rebuild);

/* After rebuild_stop: stores what was built, so that the next start can go on, and frees it. */
void rebuild_free(struct rebuild *rebuild);

/* --- any thread --- */

/*
 * Begins to build a model with the learning options of `wanted`. *ret_seq is the last change that
 * it finds; what is changed from now on is in it, too. Returns 0, -EBUSY while one is being built
 * already, -EAGAIN while it is barred, or -EIO with *error filled.
 */
int rebuild_begin(struct rebuild *rebuild, const struct options *wanted, uint64_t *ret_seq,
                  struct store_error *error) __attribute__((warn_unused_result));

/* What the rest is to leave to the one that runs: its part of the budget, or more where it takes
 * more; 0 while none runs. */
uint64_t rebuild_memory_bytes(struct rebuild *rebuild);

/* No rebuild begins until rebuild_unbar, so that the model in use keeps its store. False, and
 * nothing is barred, while one is under way. */
bool rebuild_bar(struct rebuild *rebuild) __attribute__((warn_unused_result));
void rebuild_unbar(struct rebuild *rebuild);

struct rebuild_state {
    bool is_running;
    uint64_t seq; /* the last change that it found */
    uint64_t learned;
    struct options options; /* whose learning it is built with */
    bool has_ended;         /* one did, since the start; the last that did: */
    uint64_t ended_seq;
    char failure[TROUBLE_BYTES]; /* "" where it has taken the place */
};

void rebuild_read(struct rebuild *rebuild, struct rebuild_state *ret_state);

/* Lays the learning options in force over *options. */
void rebuild_lay_over(struct rebuild *rebuild, struct options *options);

/* --- the trainer --- */

/* What the trainer works with, besides the shared model. */
struct rebuild_trainer {
    uint64_t learned;
    struct change_reader **reader; /* gets another one */
    char *text;                    /* MODEL_STORE_SETTINGS_BYTES; gets what the model is known by */
};

/*
 * Where a built model waits for it, and the trainer has come to the change that it began with: has
 * it learn the rest, up to the change that the one in use has learned, and puts it with its store
 * and its reader in that one's place. True when it did; the stored model then has learned that far
 * as well.
 */
bool rebuild_take_over(struct rebuild *rebuild, struct shared_model *shared,
                       const struct rebuild_trainer *trainer);

#endif
