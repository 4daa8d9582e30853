/*
 * examples: a corpus as features and numbers, for the learners alone, as examples.py writes it:
 *
 *   u64 items, learned, words, tags (how many there are), then the arrays of the struct, in order
 *
 * Words are counted as the items go by, since the learner asks how many items held a word so far.
 */
#ifndef UNDERTAG_BENCH_EXAMPLES_H
#define UNDERTAG_BENCH_EXAMPLES_H

#include <stdbool.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>

#include "tests/bench/learner_kind.h"

struct examples {
    uint64_t items;
    uint64_t learned; /* the first of those to be asked about */
    uint64_t words;
    uint64_t tags;
    uint64_t *x_starts; /* items + 1, as is the next: where an item's entries begin */
    uint64_t *given_starts;
    uint32_t *x_words;
    float *x_values;
    uint32_t *given;
    double *factors;       /* by tag */
    double *again_factors; /* likewise, of a pair that is rehearsed */
    /* counted here */
    bool is_counted;
    uint32_t *word_counts;
    uint32_t *tag_counts;
    struct weights_feature *x; /* of the item at hand, as is the next */
    struct weights_given *item_given;
};

static inline void *examples_array(FILE *file, uint64_t count, size_t size)
{
    void *array = calloc(count + 1, size);
    if (array && fread(array, size, count, file) != count) {
        free(array);
        array = NULL;
    }
    return array;
}

static inline void examples_deinit(struct examples *examples)
{
    void *const owned[] = {examples->x_starts,      examples->given_starts,
                           examples->x_words,       examples->x_values,
                           examples->given,         examples->factors,
                           examples->again_factors, examples->word_counts,
                           examples->tag_counts,    examples->x,
                           examples->item_given};
    for (size_t i = 0; i < sizeof owned / sizeof owned[0]; i++) {
        free(owned[i]);
    }
}

static inline bool examples_read_arrays(FILE *file, struct examples *examples)
{
    uint64_t items = examples->items;
    examples->x_starts = examples_array(file, items + 1, sizeof(uint64_t));
    examples->given_starts = examples_array(file, items + 1, sizeof(uint64_t));
    if (!examples->x_starts || !examples->given_starts) {
        return false;
    }
    examples->x_words = examples_array(file, examples->x_starts[items], sizeof(uint32_t));
    examples->x_values = examples_array(file, examples->x_starts[items], sizeof(float));
    examples->given = examples_array(file, examples->given_starts[items], sizeof(uint32_t));
    examples->factors = examples_array(file, examples->tags, sizeof(double));
    examples->again_factors = examples_array(file, examples->tags, sizeof(double));
    examples->word_counts = calloc(examples->words, sizeof(uint32_t));
    examples->tag_counts = calloc(examples->tags, sizeof(uint32_t));
    examples->x = calloc(examples->words, sizeof *examples->x);
    examples->item_given = calloc(examples->tags, sizeof *examples->item_given);
    return examples->x_words && examples->x_values && examples->given && examples->factors &&
           examples->again_factors && examples->word_counts && examples->tag_counts &&
           examples->x && examples->item_given;
}

/* 0, or -1 with a sentence on standard error. */
static inline int examples_read(const char *path, struct examples *ret_examples)
{
    struct examples examples = {0};
    FILE *file = fopen(path, "rbe");
    if (!file) {
        perror(path);
        return -1;
    }
    uint64_t sizes[4] = {0};
    bool read = fread(sizes, sizeof sizes[0], 4, file) == 4;
    examples.items = sizes[0];
    examples.learned = sizes[1];
    examples.words = sizes[2];
    examples.tags = sizes[3];
    read = read && examples_read_arrays(file, &examples);
    (void)fclose(file); /* it was only read */
    if (!read) {
        (void)fprintf(stderr, "%s: cannot be read as examples\n", path);
        examples_deinit(&examples);
        return -1;
    }
    *ret_examples = examples;
    return 0;
}

/* x of an item, in `examples->x`; returns how many features it has. */
static inline size_t examples_x(struct examples *examples, uint64_t item)
{
    uint64_t start = examples->x_starts[item];
    size_t count = (size_t)(examples->x_starts[item + 1] - start);
    for (size_t i = 0; i < count; i++) {
        uint32_t word = examples->x_words[start + i];
        examples->x[i] = (struct weights_feature){.word = word,
                                                  .document_count = examples->word_counts[word],
                                                  .value = examples->x_values[start + i]};
    }
    return count;
}

/* Adds an item to the counts of its words and tags. */
static inline void examples_count(struct examples *examples, uint64_t item)
{
    for (uint64_t i = examples->x_starts[item]; i < examples->x_starts[item + 1]; i++) {
        examples->word_counts[examples->x_words[i]]++;
    }
    for (uint64_t i = examples->given_starts[item]; i < examples->given_starts[item + 1]; i++) {
        examples->tag_counts[examples->given[i]]++;
    }
}

/* How a pass learns; a cost above 0 is one of rehearsal. */
struct examples_way {
    uint64_t pass; /* from 0 */
    double step;
    double cost;
};

/* Valid until the next item is taken. */
static inline struct example examples_take(struct examples *examples, uint64_t item,
                                           const struct examples_way *way)
{
    const double *factors = way->cost > 0.0 ? examples->again_factors : examples->factors;
    uint64_t start = examples->given_starts[item];
    size_t count = (size_t)(examples->given_starts[item + 1] - start);
    for (size_t i = 0; i < count; i++) {
        uint32_t tag = examples->given[start + i];
        examples->item_given[i] =
            (struct weights_given){.tag = tag,
                                   .tag_count = examples->tag_counts[tag],
                                   .factors = {[WEIGHTS_MAIN] = factors[tag]}};
    }
    return (struct example){.number = way->pass * examples->items + item + 1,
                            .x = examples->x,
                            .count = examples_x(examples, item),
                            .given = examples->item_given,
                            .given_count = count,
                            .step = way->step,
                            .cost = way->cost};
}

/* One pass over the items to be learned; the first one counts words and tags, unless they have been
 * counted before. 0 or -ENOMEM. */
static inline int examples_learn(struct examples *examples, const struct examples_way *way,
                                 const struct learner *learner)
{
    for (uint64_t item = 0; item < examples->learned; item++) {
        if (!examples->is_counted) {
            examples_count(examples, item);
        }
        const struct example example = examples_take(examples, item, way);
        int result = learner->learn(learner->self, &example);
        if (result < 0) {
            return result;
        }
    }
    examples->is_counted = true;
    return 0;
}

#endif
