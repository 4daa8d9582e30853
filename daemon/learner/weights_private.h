/*
 * weights_private: the weights' own insides, for the files that are the weights together: weights
 * (life, scoring, learning) and weights_parts (storing).
 */
#ifndef UNDERTAG_WEIGHTS_PRIVATE_H
#define UNDERTAG_WEIGHTS_PRIVATE_H

#include <stddef.h>
#include <stdint.h>

#include "daemon/learner/marks.h"
#include "daemon/learner/postings.h"
#include "daemon/learner/weights.h"

struct tag_entry {
    struct weights_bias bias;
    uint32_t raised_at; /* 1 + place in `raised`, 0 when not there */
};

/*
 * `raised` lists the tags whose bias alone lifts them above the floor: an item touches them even if
 * it shares no word with them. Invariant: raised[biases[t].raised_at - 1] == t.
 */
struct weights {
    struct weights_settings settings;
    struct postings *words;
    size_t word_capacity;
    struct tag_entry *biases;
    size_t tag_count;
    size_t tag_capacity;
    uint32_t *raised;
    size_t raised_count;
    size_t raised_capacity;
    uint64_t posting_count;
    uint64_t posting_bytes;
    struct marks changed_words;
    struct marks changed_tags;
};

/* Puts the tag on the list of raised ones, or takes it off, as its bias asks for. */
void weights_refresh_raised(struct weights *weights, uint32_t tag);

#endif
