/*
 * sha256_file: the SHA-256 of files, as the 64 hexadecimal digits that sha256sum prints (FIPS
 * 180-4). For bytes that come one piece after another, take nettle's own sha256_init and
 * sha256_update, and sha256_text at the end.
 */
#ifndef UNDERTAG_SHA256_FILE_H
#define UNDERTAG_SHA256_FILE_H

#include <nettle/sha2.h>
#include <stdint.h>

enum {
    SHA256_TEXT_BYTES = 2 * SHA256_DIGEST_SIZE + 1
};

/* Ends the sum and begins it anew. */
void sha256_text(struct sha256_ctx *sum, char text[SHA256_TEXT_BYTES]);

/*
 * Sums a file up from its first byte to its last; the descriptor's place stays. Returns 0 or a
 * negative errno. May take long: not on the loop.
 */
int sha256_file(int fd, char text[SHA256_TEXT_BYTES], uint64_t *ret_bytes)
    __attribute__((warn_unused_result));

#endif
