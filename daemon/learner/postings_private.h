/*
 * postings_private: the insides of postings, for the files that are it together: postings (reading
 * and changing) and postings_store (storing, and letting go of what is stored).
 */
#ifndef UNDERTAG_POSTINGS_PRIVATE_H
#define UNDERTAG_POSTINGS_PRIVATE_H

#include "daemon/learner/postings.h"
#include "daemon/learner/postings_index.h"

struct postings {
    size_t stride;
    size_t tag_limit;
    struct postings_index index;
    struct chunk *chunks;
    size_t chunk_count; /* places that have been taken once */
    size_t chunk_capacity;
    uint32_t *free_places;
    size_t free_count;
    size_t free_capacity;
    uint32_t *changed; /* places; one that was dropped and taken again may stand here twice */
    size_t changed_count;
    size_t changed_capacity;
    uint32_t *sealed; /* places, likewise */
    size_t sealed_count;
    size_t sealed_capacity;
    struct postings_cut *cuts; /* the sealed ones first */
    size_t cut_count;
    size_t cut_capacity;
    size_t sealed_cut_count;
    uint64_t number_bytes;
    size_t hand;
};

/* Gives a chunk's place back. */
void postings_free_place(struct postings *postings, uint32_t place);

#endif
