/*
 * model_store: the learner's model as stored, in an environment of its own (HOME/model), so that a
 * long write of it holds up no filing. Everything that learning reads is there as of one seq,
 * `learned`, in the same transaction: after a crash the changes behind it are learned again.
 *
 * It knows bytes and numbers, not what they mean. One thread writes; the same rules as store.h.
 */
#ifndef UNDERTAG_MODEL_STORE_H
#define UNDERTAG_MODEL_STORE_H

#include <stddef.h>
#include <stdint.h>

#include "storage/store.h"

enum {
    MODEL_STORE_FORMAT = 1,
    MODEL_STORE_SETTINGS_BYTES = 1024
};

struct model_store;
struct model_store_writing;

/* What the model as a whole is. */
struct model_store_head {
    unsigned char store_uuid[STORE_UUID_BYTES]; /* the store that it was learned from */
    char settings[MODEL_STORE_SETTINGS_BYTES];  /* what it was learned with, as text */
    uint64_t learned;
    uint64_t documents;
    uint64_t factor_count;
    double factor_sum;
    double calibration_gain;
};

struct model_store_word {
    const char *term;
    size_t term_bytes;
    uint32_t number;
    uint32_t count;
};

struct model_store_chunk {
    uint32_t word;
    uint32_t number;
    uint32_t count;
    const uint32_t *tags;
    const float *values;
    const float *accumulators;
};

struct model_store_tag {
    uint32_t number;
    uint32_t count;
    uint32_t unprompted;
    float bias;
    float bias_accumulator;
};

struct model_store_bin {
    uint32_t number;
    uint32_t count;
    const double *values;
};

int model_store_open(const struct store_settings *settings, struct model_store **ret_store,
                     struct store_error *error) __attribute__((warn_unused_result));
void model_store_close(struct model_store *store);
uint64_t model_store_file_bytes(const struct model_store *store);

/* STORE_NOT_FOUND where no model has been stored yet. */
int model_store_read_head(struct model_store *store, struct model_store_head *ret_head,
                          struct store_error *error) __attribute__((warn_unused_result));

/* Takes what was stored, part by part; anything but 0 ends the reading and is returned. */
struct model_store_sink {
    void *user;
    int (*word)(void *user, const struct model_store_word *word);
    int (*chunk)(void *user, const struct model_store_chunk *chunk);
    int (*tag)(void *user, const struct model_store_tag *tag);
    int (*bin)(void *user, const struct model_store_bin *bin);
};

/* Words come before chunks, a word's chunks in their order. */
int model_store_load(struct model_store *store, const struct model_store_sink *sink,
                     struct store_error *error) __attribute__((warn_unused_result));

int model_store_begin(struct model_store *store, struct model_store_writing **ret_writing,
                      struct store_error *error) __attribute__((warn_unused_result));
int model_store_commit(struct model_store_writing *writing, struct store_error *error)
    __attribute__((warn_unused_result));
void model_store_abort(struct model_store_writing *writing);

/* Forgets everything. */
int model_store_clear(struct model_store_writing *writing, struct store_error *error)
    __attribute__((warn_unused_result));

int model_store_put_head(struct model_store_writing *writing, const struct model_store_head *head,
                         struct store_error *error) __attribute__((warn_unused_result));
int model_store_put_word(struct model_store_writing *writing, const struct model_store_word *word,
                         struct store_error *error) __attribute__((warn_unused_result));
/* The word and its chunks are gone. */
int model_store_forget_word(struct model_store_writing *writing,
                            const struct model_store_word *word, struct store_error *error)
    __attribute__((warn_unused_result));
int model_store_put_chunk(struct model_store_writing *writing,
                          const struct model_store_chunk *chunk, struct store_error *error)
    __attribute__((warn_unused_result));
int model_store_put_tag(struct model_store_writing *writing, const struct model_store_tag *tag,
                        struct store_error *error) __attribute__((warn_unused_result));
int model_store_put_bin(struct model_store_writing *writing, const struct model_store_bin *bin,
                        struct store_error *error) __attribute__((warn_unused_result));

/* Overwrites what forgotten words left in the file; see kv_scrub. */
int model_store_scrub(struct model_store *store, size_t most_pages, size_t *ret_left,
                      struct store_error *error) __attribute__((warn_unused_result));

#endif
