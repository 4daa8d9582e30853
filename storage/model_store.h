/*
 * model_store: the learner's model as stored, in an environment of its own (HOME/model), so that a
 * long write of it holds up no filing. Everything that learning reads is there as of one seq,
 * `learned`, in the same transaction: after a crash the changes behind it are learned again.
 *
 * It knows bytes and numbers, not what they mean. One thread writes; the same rules as store.h.
 */
#ifndef UNDERTAG_MODEL_STORE_H
#define UNDERTAG_MODEL_STORE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "storage/kv.h"
#include "storage/store.h"

enum {
    MODEL_STORE_FORMAT = 5,
    MODEL_STORE_SETTINGS_BYTES = 1024
};

struct model_store;
struct model_store_writing;

/* What the model as a whole is. One that was stored in an older format has nothing but zeros: it is
 * nobody's. */
struct model_store_head {
    unsigned char store_uuid[STORE_UUID_BYTES]; /* the store that it was learned from */
    char settings[MODEL_STORE_SETTINGS_BYTES];  /* what it was learned with, as text */
    uint64_t learned;
    uint64_t documents;
    uint64_t factor_count;
    double factor_sum;
    uint64_t latest;
    uint64_t evidence_items;
    uint64_t curves_items;
    uint64_t fit_halves;
    double evidence_gain;
    uint64_t words; /* that some item holds */
    uint64_t next_word;
    uint64_t postings;
    uint64_t pruned_unspecific;
    uint64_t pruned_tiny;
    uint64_t rehearsed;
    uint64_t rehearsal_turns;
    uint64_t rehearsals;
    uint64_t rehearsed_items;
    uint64_t examples;
};

struct model_store_word {
    const char *term;
    size_t term_bytes;
    uint32_t number;
    uint32_t count;
};

/* A chunk of a word's postings; what the bytes mean is the learner's. */
struct model_store_chunk {
    uint32_t word;
    uint32_t number;
    struct kv_bytes bytes;
};

struct model_store_tag {
    uint32_t number;
    uint32_t count;
    uint32_t unprompted;
    uint32_t trial_halves;
    uint32_t given_halves;
    float bias;
    float bias_accumulator;
    float shadow_bias;
    float shadow_bias_accumulator;
    uint32_t last_count;
};

enum {
    MODEL_STORE_MOST_FIGURES = 240 /* of one list: it stays in a leaf page */
};

/* A list of numbers, known by two. */
struct model_store_figures {
    uint32_t kind;
    uint32_t number;
    uint32_t count;
    const double *values;
};

/* Numbers that go with tags: `values` has as many for each tag as the list says. */
struct model_store_tagged {
    uint32_t count;
    const uint32_t *tags;
    const float *values;
};

/* An entry of the worklist. */
struct model_store_entry {
    uint64_t number;
    uint64_t scored;
    uint64_t counted;
    float promise;
    struct model_store_tagged gaps;  /* with a value each */
    struct model_store_tagged pairs; /* with two */
};

enum {
    MODEL_STORE_ENTRY_TAGS = 64, /* at most, in either list */
    MODEL_STORE_GAP_VALUES = 1,
    MODEL_STORE_PAIR_VALUES = 2
};

int model_store_open(const struct store_settings *settings, struct model_store **ret_store,
                     struct store_error *error) __attribute__((warn_unused_result));
void model_store_close(struct model_store *store);
bool model_store_is_broken(const struct model_store *store); /* as store_is_broken */
uint64_t model_store_file_bytes(const struct model_store *store);

/* As store_copy, store_copy_bytes and store_check_pages. */
int model_store_copy(struct model_store *store, kv_take take, void *user, struct store_error *error)
    __attribute__((warn_unused_result));
int model_store_copy_bytes(struct model_store *store, uint64_t *ret_bytes,
                           struct store_error *error) __attribute__((warn_unused_result));
int model_store_check_pages(struct model_store *store, kv_tell tell, void *user,
                            struct store_error *error) __attribute__((warn_unused_result));

/* STORE_NOT_FOUND where no model has been stored yet. */
int model_store_read_head(struct model_store *store, struct model_store_head *ret_head,
                          struct store_error *error) __attribute__((warn_unused_result));

/* Takes what is held in memory, part by part (model_view_load); anything but 0 ends the reading and
 * is returned. */
struct model_store_sink {
    void *user;
    int (*tag)(void *user, const struct model_store_tag *tag);
    int (*figures)(void *user, const struct model_store_figures *figures);
};

/*
 * Writing: what is to change is collected, by a thread that may be any, and then committed, by
 * another one if that suits, in one transaction. Nothing of it is in the store before. Both commit
 * and abort free the writing; at most one of a store may be committing at a time.
 */
int model_store_begin(struct model_store *store, struct model_store_writing **ret_writing,
                      struct store_error *error) __attribute__((warn_unused_result));
int model_store_commit(struct model_store_writing *writing, struct store_error *error)
    __attribute__((warn_unused_result));
void model_store_abort(struct model_store_writing *writing);

/* Whom a commit tells now and then that it goes on: by the thread that commits. */
void model_store_watch(struct model_store_writing *writing, void (*moved)(void *user), void *user);

/* Forgets everything. */
int model_store_clear(struct model_store_writing *writing, struct store_error *error)
    __attribute__((warn_unused_result));

int model_store_put_head(struct model_store_writing *writing, const struct model_store_head *head,
                         struct store_error *error) __attribute__((warn_unused_result));
int model_store_put_word(struct model_store_writing *writing, const struct model_store_word *word,
                         struct store_error *error) __attribute__((warn_unused_result));
/* Of a word whose number is in the store, or has been put: cheaper than to put it once more. */
int model_store_put_count(struct model_store_writing *writing, uint32_t number, uint32_t count,
                          struct store_error *error) __attribute__((warn_unused_result));
/* The word, its count and its chunks are gone. */
int model_store_forget_word(struct model_store_writing *writing,
                            const struct model_store_word *word, struct store_error *error)
    __attribute__((warn_unused_result));
int model_store_put_chunk(struct model_store_writing *writing,
                          const struct model_store_chunk *chunk, struct store_error *error)
    __attribute__((warn_unused_result));
/* A chunk that is not there is no error. */
int model_store_remove_chunk(struct model_store_writing *writing, uint32_t word, uint32_t number,
                             struct store_error *error) __attribute__((warn_unused_result));
int model_store_put_tag(struct model_store_writing *writing, const struct model_store_tag *tag,
                        struct store_error *error) __attribute__((warn_unused_result));
int model_store_put_figures(struct model_store_writing *writing,
                            const struct model_store_figures *figures, struct store_error *error)
    __attribute__((warn_unused_result));
int model_store_put_entry(struct model_store_writing *writing,
                          const struct model_store_entry *entry, struct store_error *error)
    __attribute__((warn_unused_result));
/* An entry that is not there is no error. */
int model_store_remove_entry(struct model_store_writing *writing, uint64_t number,
                             struct store_error *error) __attribute__((warn_unused_result));

/* Overwrites what forgotten words left in the file; see kv_scrub. */
int model_store_scrub(struct model_store *store, size_t most_pages, size_t *ret_left,
                      struct store_error *error) __attribute__((warn_unused_result));

#endif
