/*
 * vocabulary: the tags by number and by name. Numbers are given out in the order in which tags are
 * opened and never change, so items hold numbers.
 */
#ifndef UNDERTAG_VOCABULARY_H
#define UNDERTAG_VOCABULARY_H

#include "storage/store.h"

enum vocabulary_state {
    VOCABULARY_OPEN = 0,
    VOCABULARY_RETIRED = 1
};

enum {
    VOCABULARY_NAME_BYTES = 255
};

/* In how many items … */
struct vocabulary_counts {
    uint32_t count;         /* it stands now */
    uint32_t unprompted;    /* of those, it was given without a proposal: N_l */
    uint32_t unchecked;     /* of those, nobody has gone through all tags */
    uint32_t found;         /* likewise unchecked: an editor has found it missing */
    uint32_t ruled_belongs; /* an editor has ruled that it belongs */
    uint32_t ruled_not;     /* … that it does not */
    uint32_t check_true;    /* a random check found it to belong, and nobody had looked before */
    uint32_t check_given;   /* of those, it was there */
    uint32_t second_true;   /* a second tagger gave it, as often as there are such */
    uint32_t second_given;  /* of those, the first had given it without a proposal */
};

/* Adds a change to counts; a negative one wraps around. */
void vocabulary_add(struct vocabulary_counts *counts, const struct vocabulary_counts *change);

/* A tag as stored. */
struct vocabulary_tag {
    uint32_t number;
    char name[VOCABULARY_NAME_BYTES + 1];
    struct vocabulary_counts counts;
    uint64_t opened_seq;
    enum vocabulary_state state;
};

/* The tag of a name; STORE_NOT_FOUND without a sentence. */
int vocabulary_find(struct store_view *view, const char *name, size_t bytes,
                    struct vocabulary_tag *ret_tag, struct store_error *error)
    __attribute__((warn_unused_result));

/* The tag of a number. */
int vocabulary_get(struct store_view *view, uint32_t number, struct vocabulary_tag *ret_tag,
                   struct store_error *error) __attribute__((warn_unused_result));

/* Opens a tag that is not there; it has count 0. Its number is the number of tags before. */
int vocabulary_open(struct store_view *view, const char *name, size_t bytes, uint64_t opened_seq,
                    uint32_t *ret_number, struct store_error *error)
    __attribute__((warn_unused_result));

/* Stores a tag's counts and state anew. */
int vocabulary_put(struct store_view *view, const struct vocabulary_tag *tag,
                   struct store_error *error) __attribute__((warn_unused_result));

/*
 * Calls `each` for the tags in the order of their names' bytes, from behind the name `after` on (""
 * for all), until it returns anything but 0, which is returned.
 */
int vocabulary_by_name(struct store_view *view, const char *after, size_t after_bytes,
                       int (*each)(void *user, const struct vocabulary_tag *tag), void *user,
                       struct store_error *error) __attribute__((warn_unused_result));

/* The same in the order of their numbers, all of them. */
int vocabulary_by_number(struct store_view *view,
                         int (*each)(void *user, const struct vocabulary_tag *tag), void *user,
                         struct store_error *error) __attribute__((warn_unused_result));

#endif
