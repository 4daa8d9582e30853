/*
 * store: what must survive: items, vocabulary, and the sequence of changes they came by.
 *
 * Every change has a seq, from 1, rising by 1, and is one record under it. The record of a filing
 * is the item; so the records are the journal that the learner follows and the items that people
 * read, at once. A record that a later change takes the place of stays until the learner has passed
 * that change (store_erase_passed): until then its words and tags can still be taken out.
 *
 *   meta        one record: format, UUID, last seq, counts; and notes (store_notes.h)
 *   ids         id -> the seq of its newest change, and whether that withdrew it
 *   records     (seq, piece) -> the change, in pieces that stay in a leaf page
 *   superseded  seq -> the seq of the record that it took the place of
 *   tags        number -> name, counts, state
 *   tag_names   name -> number
 *
 * Every value carries a checksum: in front, or a proof behind it (proof.h).
 *
 * Any number of threads may read (store_read); one at a time writes (store_write; others wait), and
 * one alone, the writer, deletes and scrubs. No view may outlive one job. Failure leaves everything
 * as it was: what was put in a writing view is there only once store_commit has returned 0, and
 * then it is durable.
 */
#ifndef UNDERTAG_STORE_H
#define UNDERTAG_STORE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "storage/kv_copy.h"
#include "storage/store_error.h"

enum {
    STORE_FORMAT = 3,
    STORE_FORMAT_OLDEST = 2, /* that is still read; the first commit makes it the present one */
    STORE_UUID_BYTES = 16
};

struct store;
struct store_view;

struct store_settings {
    const char *home; /* the environment is HOME/store */
    size_t map_bytes;
    size_t reserve_bytes;
    bool read_only; /* it must be there, and stays as it is */
    bool is_alone;  /* nobody else opens it: no lock file is made beside it. With read_only */
};

/* Opens or makes the store of a home. STORE_NEWER where a later version wrote it. */
int store_open(const struct store_settings *settings, struct store **ret_store,
               struct store_error *error) __attribute__((warn_unused_result));
void store_close(struct store *store);

/* What names this store, so that a model can tell whose it is. STORE_UUID_BYTES. */
const unsigned char *store_uuid(const struct store *store);

/* Whether a write has failed so that none is taken any more. Any thread. */
bool store_is_broken(const struct store *store);

uint64_t store_file_bytes(const struct store *store);

/* All that is committed as the bytes of a file, and how many they will be; see kv_copy. */
int store_copy(struct store *store, kv_take take, void *user, struct store_error *error)
    __attribute__((warn_unused_result));
int store_copy_bytes(struct store *store, uint64_t *ret_bytes, struct store_error *error)
    __attribute__((warn_unused_result));

/* Looks through the pages of the file; see kv_check_pages. */
int store_check_pages(struct store *store, kv_tell tell, void *user, struct store_error *error)
    __attribute__((warn_unused_result));

/* Begins a view of everything committed so far. */
int store_read(struct store *store, struct store_view **ret_view, struct store_error *error)
    __attribute__((warn_unused_result));

/* Begins a view in which the writer thread may change things. */
int store_write(struct store *store, struct store_view **ret_view, struct store_error *error)
    __attribute__((warn_unused_result));

/* Ends a writing view and makes its changes durable. */
int store_commit(struct store_view *view, struct store_error *error)
    __attribute__((warn_unused_result));

/* Ends a view; what was put in a writing one is forgotten. NULL is allowed. */
void store_end(struct store_view *view);

/* What people have looked at, over all items. */
struct store_evidence {
    uint64_t checks_random; /* items checked after having been drawn at random */
    uint64_t checks_picked; /* … otherwise */
    uint64_t seen;          /* tags that were on randomly checked items */
    uint64_t wrong;         /* of those, taken off */
    uint64_t second_items;  /* items with a second tagging; of all second taggings: */
    uint64_t second_first;  /* tags that the first tagger gave without a proposal */
    uint64_t second_second; /* tags that the second one gave */
    uint64_t second_both;   /* tags that both gave */
};

struct store_totals {
    uint64_t seq;   /* of the last change; 0: none yet */
    uint64_t items; /* filed and not withdrawn */
    uint64_t tags;
    struct store_evidence evidence;
};

struct store_totals store_view_totals(const struct store_view *view);

/*
 * Erases the records whose successors the learner has durably passed: those superseded by a change
 * up to `learned`. At most `most` a call; says how many it erased. It stops before what is damaged
 * in the list of them; STORE_CORRUPT, with nothing erased, where that comes first.
 */
int store_erase_passed(struct store_view *view, uint64_t learned, size_t most, size_t *ret_erased,
                       struct store_error *error) __attribute__((warn_unused_result));

/* Overwrites what erased records left in the file; see kv_scrub. Writer thread, outside a view. */
int store_scrub(struct store *store, size_t most_pages, size_t *ret_left, struct store_error *error)
    __attribute__((warn_unused_result));

#endif
