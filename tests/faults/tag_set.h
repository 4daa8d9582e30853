/*
 * tag_set: a few tags of the ledger's vocabulary, by number. As wide as any set that the ledger
 * makes; more fails the test.
 */
#ifndef UNDERTAG_TESTS_TAG_SET_H
#define UNDERTAG_TESTS_TAG_SET_H

#include <stdbool.h>
#include <stdlib.h>

enum {
    TAG_SET_MOST = 12
};

struct tag_set {
    unsigned count;
    unsigned tags[TAG_SET_MOST]; /* none twice, in no order */
};

static inline bool tag_set_holds(const struct tag_set *set, unsigned tag)
{
    for (unsigned i = 0; i < set->count; i++) {
        if (set->tags[i] == tag) {
            return true;
        }
    }
    return false;
}

static inline void tag_set_add(struct tag_set *set, unsigned tag)
{
    if (tag_set_holds(set, tag)) {
        return;
    }
    if (set->count == TAG_SET_MOST) {
        abort(); /* what the ledger draws has room */
    }
    set->tags[set->count++] = tag;
}

static inline void tag_set_unite(struct tag_set *set, const struct tag_set *other)
{
    for (unsigned i = 0; i < other->count; i++) {
        tag_set_add(set, other->tags[i]);
    }
}

/* Leaves the tags that `other` holds, or those that it does not. */
static inline void tag_set_keep(struct tag_set *set, const struct tag_set *other, bool held)
{
    unsigned kept = 0;
    for (unsigned i = 0; i < set->count; i++) {
        if (tag_set_holds(other, set->tags[i]) == held) {
            set->tags[kept++] = set->tags[i];
        }
    }
    set->count = kept;
}

static inline bool tag_set_equal(const struct tag_set *one, const struct tag_set *other)
{
    struct tag_set common = *one;
    tag_set_keep(&common, other, true);
    return one->count == other->count && common.count == one->count;
}

#endif
