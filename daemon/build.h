/*
 * build: a model that is learned anew from the stored items, and is kept in HOME/model.next until
 * it is learned. It can be taken up where it was kept last. One thread at a time.
 *
 * The items are those of one moment, the change `moment`: up to there each is met once, as it was
 * then, in the order of their changes; from there on the changes themselves are learned, as they
 * are by the model in use. So what comes of it does not depend on when the build was at work.
 */
#ifndef UNDERTAG_BUILD_H
#define UNDERTAG_BUILD_H

#include "daemon/change_reader.h"
#include "daemon/memory_shares.h"
#include "daemon/model_base.h"
#include "daemon/options.h"
#include "storage/model_store.h"

/* All but `options` borrowed for the build's life. */
struct build_settings {
    struct store *store;
    struct store_settings places;
    const struct options *options; /* whose learning is wanted */
    struct siphash_key key;
    uint64_t number; /* of the rebuild: no other has had it */
    uint64_t moment;
    uint64_t memory_bytes; /* for the build alone */
};

/* To be read; changed here alone, but for what another owner has exchanged. */
struct build {
    struct build_settings settings;
    struct model *model;
    struct model_store *model_store;
    struct change_reader *reader;
    struct model_scratch *scratch;
    struct model_base base; /* entered while it learns */
    struct memory_shares shares;
    uint64_t bytes; /* that it takes, or soon will; as of the last few changes */
    char text[MODEL_STORE_SETTINGS_BYTES]; /* what the model is known by */
    uint64_t learned;
    uint64_t kept;       /* the seq of what is stored */
    uint64_t kept_at_us; /* when it was stored last */
    uint64_t keeping_us; /* how long that took */
};

/* Takes up what was kept of this build, or begins. On failure there is nothing to close. */
int build_open(const struct build_settings *settings, struct build *ret_build,
               struct store_error *error) __attribute__((warn_unused_result));
void build_close(struct build *build);

/* Learns changes up to `last`, as many as one short view allows. */
int build_learn(struct build *build, uint64_t last, struct store_error *error)
    __attribute__((warn_unused_result));

/* Whether it must be stored before more is learned. */
bool build_is_full(const struct build *build);

/* Stores what was learned since it was stored last, if anything was. */
int build_keep(struct build *build, struct store_error *error) __attribute__((warn_unused_result));

#endif
