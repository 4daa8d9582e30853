/*
 * filling: long filings, until there is no room for another.
 */
#ifndef UNDERTAG_TESTS_FILLING_H
#define UNDERTAG_TESTS_FILLING_H

#include "tests/integration/peer.h"

enum {
    FILLING_BYTES = 200 * 1024, /* of a text */
    FILLINGS_MOST = 100         /* far more than fits into 16 MiB */
};

/* A text of that many bytes, of a few long words, so that it is the store that fills up and not the
 * model. On the heap. */
char *filling_text(size_t bytes);

/* Files "entry N" from 0 on until -32005; returns the first that was refused. */
unsigned filling_fill(struct peer *peer);

#endif
