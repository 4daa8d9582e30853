/*
 * proof: what a small value ends with that has no checksum in front: one of its key and itself, so
 * that damage never passes for another item, tag or change. What an earlier version wrote has none,
 * and is taken as it is.
 */
#ifndef UNDERTAG_PROOF_H
#define UNDERTAG_PROOF_H

#include "storage/codec.h"
#include "storage/kv.h"

/* A mark and a checksum. Five bytes, so that no single bit of a value's length takes it off. */
enum {
    PROOF_BYTES = 5
};

/* Ends the value of a key. */
void proof_put(struct codec_writer *value, struct kv_bytes key);

/* Whether a value is one of `bytes`, the proof not counted, that is as it was put. */
bool proof_holds(struct kv_bytes key, struct kv_bytes value, size_t bytes);

#endif
