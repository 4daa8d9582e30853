/*
 * weights_checksum: all that a stopped daemon has learned as one number.
 */
#ifndef UNDERTAG_TESTS_WEIGHTS_CHECKSUM_H
#define UNDERTAG_TESTS_WEIGHTS_CHECKSUM_H

#include <stdint.h>

/*
 * Over the stored words, chunks of weights and tags (with their biases and counts) of a home that
 * no daemon has open, in the order of their keys. Neither figures nor entries of the worklist are
 * in it, which depend on when there was time to score again.
 */
uint64_t weights_checksum(const char *home);

#endif
