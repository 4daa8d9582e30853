/*
 * kv_copy: an environment as a stream of bytes: those of a data.mdb that holds what one moment's
 * reader sees, without free pages, so that it is as small as it can be. Whoever takes the bytes
 * says how fast; writers go on meanwhile, but no page that the moment needs is used again, so a
 * slow copy lets the file grow.
 */
#ifndef UNDERTAG_KV_COPY_H
#define UNDERTAG_KV_COPY_H

#include "storage/kv.h"

/* Takes the next bytes, which come as soon as the moment is fixed. Anything but 0 ends the copy. */
typedef int (*kv_take)(void *user, const void *data, size_t size);

/*
 * Copies all that is committed, with the calling thread in `take`. STORE_STOPPED where `take` has
 * ended it, without a sentence.
 */
int kv_copy(struct kv *kv, kv_take take, void *user, struct store_error *error)
    __attribute__((warn_unused_result));

/* How many bytes a copy of what is committed now would have. */
int kv_copy_bytes(struct kv *kv, uint64_t *ret_bytes, struct store_error *error)
    __attribute__((warn_unused_result));

#endif
