#include "storage/proof.h"

enum {
    PROOF_MARK = 0xA5
};

static uint32_t proof_of(struct kv_bytes key, const void *value, size_t bytes)
{
    return codec_checksum(key.data, key.size) ^ codec_checksum(value, bytes);
}

void proof_put(struct codec_writer *value, struct kv_bytes key)
{
    uint32_t proof = proof_of(key, value->data, value->size);
    codec_put_u8(value, PROOF_MARK);
    codec_put_u32(value, proof);
}

bool proof_holds(struct kv_bytes key, struct kv_bytes value, size_t bytes)
{
    if (value.size == bytes) {
        return true; /* of an earlier version */
    }
    if (value.size != bytes + PROOF_BYTES) {
        return false;
    }
    struct codec_reader reader = {.data = value.data, .size = value.size, .at = bytes};
    return codec_get_u8(&reader) == PROOF_MARK &&
           codec_get_u32(&reader) == proof_of(key, value.data, bytes);
}
