#include "daemon/sha256_file.h"

#include <errno.h>
#include <stdio.h>
#include <unistd.h>

enum {
    PIECE_BYTES = 32768
};

void sha256_text(struct sha256_ctx *sum, char text[SHA256_TEXT_BYTES])
{
    uint8_t digest[SHA256_DIGEST_SIZE];
    sha256_digest(sum, sizeof digest, digest);
    for (size_t i = 0; i < sizeof digest; i++) {
        (void)snprintf(text + 2 * i, 3, "%02x", (unsigned)digest[i]); /* it fits */
    }
}

int sha256_file(int fd, char text[SHA256_TEXT_BYTES], uint64_t *ret_bytes)
{
    uint8_t piece[PIECE_BYTES];
    struct sha256_ctx sum;
    uint64_t bytes = 0;
    sha256_init(&sum);
    for (;;) {
        ssize_t got = pread(fd, piece, sizeof piece, (off_t)bytes);
        if (got < 0 && errno != EINTR) {
            return -errno;
        }
        if (got == 0) {
            break;
        }
        if (got > 0) {
            sha256_update(&sum, (size_t)got, piece);
            bytes += (uint64_t)got;
        }
    }
    sha256_text(&sum, text);
    *ret_bytes = bytes;
    return 0;
}
