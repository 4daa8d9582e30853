/*
 * examples_bench: a learner alone, its features given: passes over the items to be learned in the
 * processor's time, and after each pass the best tags of every item to be asked about.
 *
 *   examples_bench EXAMPLES RANKS weights|plain PASSES STEP AGAIN COST SPECIFICITY
 *
 * The first pass takes the STEP; those after it rehearse, with the step AGAIN and shrinkage by
 * COST. RANKS gets u32 tag numbers, DEPTH an item, pass after pass. A SPECIFICITY below 0 is the
 * daemon's default; the plain learner has none.
 */
#include <string.h>

#include "tests/bench/corpus.h"
#include "tests/bench/examples.h"

enum {
    DEPTH = 20
};

static int rank_all(struct examples *examples, const struct learner *learner, FILE *ranks)
{
    for (uint64_t item = examples->learned; item < examples->items; item++) {
        uint32_t tags[DEPTH];
        size_t count = examples_x(examples, item);
        if (learner->rank(learner->self, examples->x, count, tags, DEPTH) < 0 ||
            fwrite(tags, sizeof tags[0], DEPTH, ranks) != DEPTH) {
            return -1;
        }
    }
    return 0;
}

/* The first pass, and the others. */
struct ways {
    struct examples_way first;
    struct examples_way again;
};

static int run(struct examples *examples, const struct learner *learner, FILE *ranks, long passes,
               const struct ways *ways)
{
    printf("{\"seconds\": [");
    for (long pass = 0; pass < passes; pass++) {
        double begun = bench_cpu_s();
        struct examples_way way = pass == 0 ? ways->first : ways->again;
        way.pass = (uint64_t)pass;
        if (examples_learn(examples, &way, learner) < 0) {
            return -1;
        }
        printf("%s%.6f", pass > 0 ? ", " : "", bench_cpu_s() - begun);
        if (rank_all(examples, learner, ranks) < 0) {
            return -1;
        }
    }
    printf("], \"items\": %llu, \"postings\": %llu}\n", (unsigned long long)examples->learned,
           (unsigned long long)learner->postings(learner->self));
    return 0;
}

int main(int argc, char **argv)
{
    struct examples examples;
    struct learner learner = {0};
    if (argc != 9) {
        (void)fprintf(stderr,
                      "usage: examples_bench EXAMPLES RANKS weights|plain PASSES STEP AGAIN COST "
                      "SPECIFICITY\n");
        return EXIT_FAILURE;
    }
    FILE *ranks = fopen(argv[2], "wbe");
    if (!ranks) {
        perror(argv[2]);
        return EXIT_FAILURE;
    }
    if (examples_read(argv[1], &examples) < 0) {
        (void)fclose(ranks); /* nothing was written */
        return EXIT_FAILURE;
    }
    int code = strcmp(argv[3], "plain") == 0
                   ? plain_learner_new(examples.words, examples.tags, &learner)
                   : weights_learner_new(examples.tags, strtod(argv[8], NULL), &learner);
    if (code == 0) {
        const struct ways ways = {
            .first = {.step = strtod(argv[5], NULL)},
            .again = {.step = strtod(argv[6], NULL), .cost = strtod(argv[7], NULL)}};
        code = run(&examples, &learner, ranks, strtol(argv[4], NULL, 10), &ways);
        learner.free(learner.self);
    }
    examples_deinit(&examples);
    if (fclose(ranks) != 0 || code < 0) {
        (void)fprintf(stderr, "examples_bench: no memory, or no room for the ranks\n");
        return EXIT_FAILURE;
    }
    return EXIT_SUCCESS;
}
