/*
 * verify: looks through everything that is stored, and changes nothing: the file's own pages, then
 * checksums, and whether what stands in different tables fits together. Counts are taken again from
 * the items.
 *
 * Open the store and the model with `read_only`. Damage that is met on opening them may end the
 * process: let it be one that nobody minds.
 */
#ifndef UNDERTAG_VERIFY_H
#define UNDERTAG_VERIFY_H

#include <stdint.h>

#include "storage/model_store.h"
#include "storage/store.h"

struct verify_sink {
    void *user;
    void (*fault)(void *user, const char *sentence); /* names what is damaged */
};

struct verify_store_sums {
    struct store_totals totals;
    uint64_t records;
    uint64_t faults;
};

/* STORE_OK however many faults there are; an error where it could not look. */
int verify_store(struct store *store, const struct verify_sink *sink,
                 struct verify_store_sums *ret_sums, struct store_error *error)
    __attribute__((warn_unused_result));

/* What the model must fit to. */
struct verify_origin {
    const unsigned char *store_uuid; /* STORE_UUID_BYTES */
    uint64_t last_seq;               /* of the store, read after the model was opened */
    uint64_t tags;
};

struct verify_model_sums {
    struct model_store_head head;
    uint64_t words;
    uint64_t chunks;
    uint64_t entries;
    uint64_t faults;
};

/* Likewise. STORE_NOT_FOUND where no model is stored. */
int verify_model(struct model_store *store, const struct verify_origin *origin,
                 const struct verify_sink *sink, struct verify_model_sums *ret_sums,
                 struct store_error *error) __attribute__((warn_unused_result));

#endif
