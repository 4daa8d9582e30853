/*
 * examples_bench: a learner alone, its features given: passes over the items to be learned in the
 * processor's time, and after each pass the best tags of every item to be asked about.
 *
 *   examples_bench EXAMPLES RANKS weights|plain PASSES STEP AGAIN SPECIFICITY
 *
 * The first pass takes the STEP, what comes after it the step AGAIN. RANKS gets u32 tag numbers,
 * DEPTH an item, pass after pass. A SPECIFICITY below 0 is the daemon's default; the plain learner
 * has none.
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

static int run(struct examples *examples, const struct learner *learner, FILE *ranks, long passes,
               double step, double again)
{
    printf("{\"seconds\": [");
    for (long pass = 0; pass < passes; pass++) {
        double begun = bench_cpu_s();
        if (examples_learn(examples, (uint64_t)pass, pass == 0 ? step : again, learner) < 0) {
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
    if (argc != 8) {
        (void)fprintf(stderr,
                      "usage: examples_bench EXAMPLES RANKS weights|plain PASSES STEP AGAIN "
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
                   : weights_learner_new(examples.tags, strtod(argv[7], NULL), &learner);
    if (code == 0) {
        code = run(&examples, &learner, ranks, strtol(argv[4], NULL, 10), strtod(argv[5], NULL),
                   strtod(argv[6], NULL));
        learner.free(learner.self);
    }
    examples_deinit(&examples);
    if (fclose(ranks) != 0 || code < 0) {
        (void)fprintf(stderr, "examples_bench: no memory, or no room for the ranks\n");
        return EXIT_FAILURE;
    }
    return EXIT_SUCCESS;
}
