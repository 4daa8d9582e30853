/*
 * postings_look: the chunks of a word, one by one. For cmocka tests.
 */
#ifndef UNDERTAG_TESTS_POSTINGS_LOOK_H
#define UNDERTAG_TESTS_POSTINGS_LOOK_H

#include "daemon/learner/postings.h"

static inline uint32_t chunks_of(const struct postings *postings, uint32_t word)
{
    const uint32_t *places = NULL;
    return postings_chunks(postings, word, &places);
}

static inline uint32_t place_of(const struct postings *postings, uint32_t word, uint32_t number)
{
    const uint32_t *places = NULL;
    (void)postings_chunks(postings, word, &places);
    return places[number] - 1;
}

#endif
