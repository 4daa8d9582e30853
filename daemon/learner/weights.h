/*
 * weights: the linear scorer of every tag, kept by word: a word's postings are its (tag, weight)
 * pairs, so that an item visits only the postings of its own words. They are read from the base
 * where they are not in memory (postings.h), and their numbers are coded (cell.h).
 *
 *   s_l(x) = -1 + b_l + Σ_i w_il·x_i
 *
 * The base of -1 makes a tag that shares nothing with the item, and has no bias, exactly satisfied
 * as a negative; so an example touches its own tags and those with a score above the floor, no
 * others. Only a tag that an item has may create a weight. Learning is AdaGrad (Duchi et al. 2011)
 * with the importance-aware step of surrogate.h.
 *
 * The bias is learned as the weight of a feature of value .5 that every item has: with the loss's
 * slope g its gradient is .5·g, its rate r = η/√(.1 + G) where G sums (.5·g)², and it adds .5²·r to
 * the curvature D; b_l, which is .5 times that weight, moves by y·α·.5²·r. It speaks for the tag on
 * every item, so it is held: an example of a tag that fewer than ten items have leaves it at 0 or
 * below.
 *
 * Two learners may share the postings, each in a lane of its own: the shadow sees the same items
 * and learns them with other factors.
 *
 * Nothing here is locked: many threads may score (each with its own scratch and base) while none
 * changes the weights.
 */
#ifndef UNDERTAG_WEIGHTS_H
#define UNDERTAG_WEIGHTS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "daemon/base.h"
#include "daemon/learner/marks.h"
#include "daemon/learner/surrogate.h"

enum weights_lane {
    WEIGHTS_MAIN,
    WEIGHTS_SHADOW,
    WEIGHTS_LANES
};

struct weights_settings {
    enum surrogate surrogate;
    /* A word creates a weight for a tag only while its document count is at most this many times
     * the tag's count; 0 for no such rule. */
    double specificity;
    bool shadow; /* there is a second lane */
};

/* One feature of x. */
struct weights_feature {
    uint32_t word;
    uint32_t document_count; /* items that hold the word, this one included */
    float value;
};

/* A tag that the item has. */
struct weights_given {
    uint32_t tag;
    uint32_t tag_count;            /* items that have the tag, this one included */
    double factors[WEIGHTS_LANES]; /* how many times the pair counts, >= 0 */
};

/* A tag with its score. */
struct weights_rival {
    uint32_t tag;
    float score;
};

struct weights;
struct weights_scratch;

/* The score of a tag that shares nothing with the item and has no bias. */
#define WEIGHTS_BASE_SCORE (-1.0F)

/* Above this score a tag is a rival of the item's own: it is scored, learned and proposed. */
#define WEIGHTS_FLOOR_SCORE (-0.98F)

int weights_new(const struct weights_settings *settings, struct weights **ret_weights)
    __attribute__((warn_unused_result));
void weights_free(struct weights *weights);

/* Makes room for tags below `count`, their bias 0. Returns 0 or -ENOMEM. */
int weights_reserve_tags(struct weights *weights, size_t count) __attribute__((warn_unused_result));

/* Postings over all words, in memory or not. */
uint64_t weights_postings(const struct weights *weights);

/* Postings that were left out again when a word's were put in order: those of words that had become
 * too common for the tag (see specificity), and those with next to no weight. */
struct weights_pruned {
    uint64_t unspecific;
    uint64_t tiny;
};

struct weights_pruned weights_pruned(const struct weights *weights);

/* Bytes held in memory; and those of them that are kept of the tags, which cannot be let go of. */
uint64_t weights_bytes(const struct weights *weights);
uint64_t weights_tag_bytes(const struct weights *weights);

int weights_scratch_new(struct weights_scratch **ret_scratch) __attribute__((warn_unused_result));
void weights_scratch_free(struct weights_scratch *scratch);
uint64_t weights_scratch_bytes(const struct weights_scratch *scratch);

/*
 * Scores x (L2-normalised, no word twice) in the first `lanes` lanes against every tag that it
 * touches: those with a posting of one of its words and those whose bias alone lifts them above the
 * floor. The sums stay in the scratch until its next use. Returns 0, -ENOMEM, or -EIO where the
 * base cannot be read.
 */
int weights_score(const struct weights *weights, const struct base *base,
                  const struct weights_feature *x, size_t count, size_t lanes,
                  struct weights_scratch *scratch) __attribute__((warn_unused_result));

/* The touched tags with a score above the floor, in no order; valid until the scratch is used
 * again. */
const struct weights_rival *weights_rivals(const struct weights_scratch *scratch,
                                           enum weights_lane lane, size_t *ret_count);

bool weights_is_touched(const struct weights_scratch *scratch, uint32_t tag);

/* Whether any word of the item just scored has a weight for any tag. */
bool weights_speak(const struct weights_scratch *scratch);

/* s_l of any tag, after weights_score: a touched one's score, otherwise -1 + b_l. */
float weights_tag_score(const struct weights *weights, const struct weights_scratch *scratch,
                        enum weights_lane lane, uint32_t tag);

/*
 * What each feature adds to each tag's score: parts[k·count + i] = w_il·x_i for l = tags[k], 0
 * where there is no weight. `tags` holds no tag twice, each below the reserved number of tags. Uses
 * the scratch, whose scores stay. Returns 0, -ENOMEM or -EIO.
 */
int weights_explain(const struct weights *weights, const struct base *base,
                    const struct weights_feature *x, size_t count, const uint32_t *tags,
                    size_t tag_count, struct weights_scratch *scratch, float *parts)
    __attribute__((warn_unused_result));

/* What is learned of the item that the scratch has just scored; all borrowed. */
struct weights_example {
    uint64_t number;                 /* no two examples have the same; what chance rounds by */
    const struct weights_feature *x; /* as it was scored */
    size_t count;
    size_t lanes;                      /* that learn it; they have been scored */
    const struct weights_given *given; /* tags that it has; none twice */
    size_t given_count;
    bool pairs_alone;       /* learn the pairs named here; otherwise all other tags are negatives */
    const uint32_t *denied; /* negatives where pairs are alone; none of them given */
    size_t denied_count;
    double step;             /* η for this item */
    const uint32_t *watched; /* by the main lane */
    size_t watched_count;
    float *moves; /* by watched tag: set to what this adds to its score */
};

/* Brings the postings of x's words into memory, as learning needs them. Returns 0, -ENOMEM or -EIO.
 */
int weights_admit(struct weights *weights, const struct base *base, const struct weights_feature *x,
                  size_t count) __attribute__((warn_unused_result));

/* Learns an example whose words are admitted; each negative counts once. Returns 0 or -ENOMEM;
 * after that the weights are as far as the example got and must not be used any more. */
int weights_learn(struct weights *weights, const struct weights_example *example,
                  struct weights_scratch *scratch) __attribute__((warn_unused_result));

/* By how much the weights of an item's words shrink; all borrowed. */
struct weights_shrinkage {
    uint64_t number;                 /* of the example that comes next; what chance rounds by */
    const struct weights_feature *x; /* its words, admitted */
    size_t count;
    double step; /* η, as it will be learned with */
    double cost; /* C, what a loss weighs beside ½‖w‖² */
};

/*
 * Shrinks the weights of an item's words by the item's part of w → w / (1 + r/C), r the weight's
 * rate η/√(.1 + G), in all lanes; after a pass over all items each weight has shrunk about once.
 * Biases do not shrink. Returns 0 or -ENOMEM; after that the weights must not be used any more.
 */
int weights_shrink(struct weights *weights, const struct weights_shrinkage *shrinkage)
    __attribute__((warn_unused_result));

/* Forgets a word with all its postings, stored ones included. Returns 0, -ENOMEM or -EIO. */
int weights_forget_word(struct weights *weights, const struct base *base, uint32_t word)
    __attribute__((warn_unused_result));

/* Lets go of what is stored and was not wanted lately, until there are at most so many bytes or
 * nothing more can go; in steps of a bounded size, see postings_trim. */
void weights_trim(struct weights *weights, uint64_t bytes);

/* --- for those who store the weights ------------------------------------------------------------
 * What has changed is marked, chunk by chunk and tag by tag, until it is stored. */

/* A chunk of a word's postings in the form in which the base gives it back. */
struct weights_chunk {
    uint32_t word;
    uint32_t number; /* of the word's chunks, from 0 */
    struct base_bytes bytes;
};

/* Calls `each` for every chunk that is no more (its bytes are empty); likewise. */
int weights_cut_chunks(const struct weights *weights,
                       int (*each)(void *user, const struct weights_chunk *chunk), void *user)
    __attribute__((warn_unused_result));

/* Calls `each` for every changed chunk, by rising word and number; anything but 0 ends it and is
 * returned. -ENOMEM. */
int weights_changed_chunks(const struct weights *weights,
                           int (*each)(void *user, const struct weights_chunk *chunk), void *user)
    __attribute__((warn_unused_result));

/* Bytes of a posting, and of a chunk in memory on average. */
uint64_t weights_posting_bytes(const struct weights *weights);
uint64_t weights_chunk_bytes(const struct weights *weights);

/* How many of them there are, or a few more. */
size_t weights_changed_count(const struct weights *weights);

/* A tag's bias b_l and its accumulator G, to be stored when the tag is among the changed ones. */
struct weights_bias {
    float value;
    float accumulator;
};

/* How many items had the tag when it was given last. */
uint32_t weights_tag_count(const struct weights *weights, uint32_t tag);

struct weights_bias weights_bias(const struct weights *weights, enum weights_lane lane,
                                 uint32_t tag);

/* Calls `each` for every tag that has changed and is not stored: its bias, or what the owner has
 * marked; anything but 0 ends it and is returned. */
int weights_changed_tags(const struct weights *weights, int (*each)(void *user, uint32_t tag),
                         void *user) __attribute__((warn_unused_result));
size_t weights_changed_tag_count(const struct weights *weights); /* or a few more */

/* Marks a tag as changed for a reason of the owner's. Returns 0 or -ENOMEM. */
int weights_mark_tag(struct weights *weights, uint32_t tag) __attribute__((warn_unused_result));

/* What has changed is on its way to the store, and what was sealed has arrived (see postings.h).
 * Returns 0, or -ENOMEM with everything still to be stored. */
int weights_seal(struct weights *weights) __attribute__((warn_unused_result));
void weights_stored(struct weights *weights);

/* Marks everything as stored. */
void weights_clean(struct weights *weights);

/* Puts back what was stored and is kept in memory: a tag's bias in a lane that there is, the tag's
 * count when it was given last, and the numbers of postings. Nothing is marked as changed. Returns
 * 0 or -ENOMEM. */
int weights_restore_bias(struct weights *weights, enum weights_lane lane, uint32_t tag,
                         struct weights_bias bias) __attribute__((warn_unused_result));
int weights_restore_count(struct weights *weights, uint32_t tag, uint32_t count)
    __attribute__((warn_unused_result));
void weights_restore_postings(struct weights *weights, uint64_t postings,
                              struct weights_pruned pruned);

/* A tag's weight for some word, in the main lane. */
struct weights_pair {
    uint32_t tag;
    float weight;
};

enum {
    WEIGHTS_CHUNK_PAIRS = 160 /* at most, in a chunk */
};

/* What a stored chunk's postings weigh, which may be 0: their word speaks for the tag all the same
 * (weights_speak). Tags are below `tag_count`. Returns how many there are, or -EINVAL for what is
 * no chunk of these weights. */
int weights_read_chunk(const struct weights *weights, struct base_bytes chunk,
                       struct weights_pair ret_pairs[WEIGHTS_CHUNK_PAIRS]);

#endif
