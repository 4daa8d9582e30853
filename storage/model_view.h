/*
 * model_view: the parts of the stored model that are read when they are wanted, as of one moment:
 * words, chunks of postings, entries of the worklist. One thread at a time a view; no view outlives
 * one job, since a writer can use no page that a view may still read.
 */
#ifndef UNDERTAG_MODEL_VIEW_H
#define UNDERTAG_MODEL_VIEW_H

#include "storage/model_store.h"

struct model_view;

int model_view_open(struct model_store *store, struct model_view **ret_view,
                    struct store_error *error) __attribute__((warn_unused_result));
void model_view_close(struct model_view *view);

/* All of these: STORE_NOT_FOUND, without a sentence, where there is no such thing. */

/* A chunk's bytes, valid until the next chunk is read; fastest for a word's chunks in their order.
 */
int model_view_chunk(struct model_view *view, uint32_t word, uint32_t number,
                     struct kv_bytes *ret_bytes, struct store_error *error)
    __attribute__((warn_unused_result));

int model_view_word(struct model_view *view, const char *term, size_t term_bytes,
                    struct model_store_word *ret_word, struct store_error *error)
    __attribute__((warn_unused_result));

/* An entry of the worklist; its lists are valid until the next is read. */
int model_view_entry(struct model_view *view, uint64_t number, struct model_store_entry *ret_entry,
                     struct store_error *error) __attribute__((warn_unused_result));

/* The entry with the next greater number. */
int model_view_entry_after(struct model_view *view, uint64_t number,
                           struct model_store_entry *ret_entry, struct store_error *error)
    __attribute__((warn_unused_result));

/* --- all of it, for a copy ---------------------------------------------------------------------
 */

/* The head; STORE_NOT_FOUND where no model has been stored yet. */
int model_view_head(struct model_view *view, struct model_store_head *ret_head,
                    struct store_error *error) __attribute__((warn_unused_result));

/* What is held in memory: the tags by their numbers, then the figures. */
int model_view_load(struct model_view *view, const struct model_store_sink *sink,
                    struct store_error *error) __attribute__((warn_unused_result));

/* Calls `each` for every word, in the order of their bytes, or every chunk, by rising word and
 * number, until it returns anything but 0, which is returned. What it is given is valid for the
 * call. */
int model_view_each_word(struct model_view *view,
                         int (*each)(void *user, const struct model_store_word *word), void *user,
                         struct store_error *error) __attribute__((warn_unused_result));
int model_view_each_chunk(struct model_view *view,
                          int (*each)(void *user, const struct model_store_chunk *chunk),
                          void *user, struct store_error *error)
    __attribute__((warn_unused_result));

#endif
