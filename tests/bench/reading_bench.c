/*
 * reading_bench: how long it takes to score an item, beside how long it would take to read all of
 * its postings once, 8 bytes each, as fast as this machine reads memory in order.
 *
 *   reading_bench EXAMPLES STEP
 */
#include "tests/bench/corpus.h"
#include "tests/bench/examples.h"

enum {
    TOP = 10,
    ROUNDS = 5
};

static const size_t READ_BYTES = 1U << 30; /* far beyond any cache */

/* Four sums, so that the adding does not wait for itself. */
static uint64_t sum_of(const uint64_t *numbers, size_t count)
{
    uint64_t sums[4] = {0};
    for (size_t i = 0; i + 4 <= count; i += 4) {
        sums[0] += numbers[i];
        sums[1] += numbers[i + 1];
        sums[2] += numbers[i + 2];
        sums[3] += numbers[i + 3];
    }
    return sums[0] + sums[1] + sums[2] + sums[3];
}

/* Bytes a second, the best of several times; 0 without memory. */
static double reading_rate(void)
{
    size_t count = READ_BYTES / sizeof(uint64_t);
    uint64_t *numbers = malloc(READ_BYTES);
    double best_s = 0.0;
    if (!numbers) {
        return 0.0;
    }
    for (size_t i = 0; i < count; i++) {
        numbers[i] = i;
    }
    for (int round = 0; round < ROUNDS; round++) {
        double begun = bench_cpu_s();
        volatile uint64_t sum = sum_of(numbers, count); /* so that it is made */
        (void)sum;
        double seconds = bench_cpu_s() - begun;
        best_s = round == 0 || seconds < best_s ? seconds : best_s;
    }
    free(numbers);
    return (double)READ_BYTES / best_s;
}

/* Seconds an item, the best of several times; below 0 without memory. */
static double scoring_time(struct examples *examples, const struct learner *learner)
{
    double best_s = 0.0;
    for (int round = 0; round < ROUNDS; round++) {
        double begun = bench_cpu_s();
        for (uint64_t item = examples->learned; item < examples->items; item++) {
            uint32_t tags[TOP];
            size_t count = examples_x(examples, item);
            if (learner->rank(learner->self, examples->x, count, tags, TOP) < 0) {
                return -1.0;
            }
        }
        double seconds = bench_cpu_s() - begun;
        best_s = round == 0 || seconds < best_s ? seconds : best_s;
    }
    return best_s / (double)(examples->items - examples->learned);
}

/* Postings an item, on average over those asked about. */
static double postings_of_items(const struct examples *examples, const uint32_t *postings)
{
    double sum = 0.0;
    uint64_t first = examples->x_starts[examples->learned];
    uint64_t end = examples->x_starts[examples->items];
    for (uint64_t i = first; i < end; i++) {
        sum += postings[examples->x_words[i]];
    }
    return sum / (double)(examples->items - examples->learned);
}

/* Learns, then scores: seconds an item, below 0 without memory. */
static double learn_and_score(struct examples *examples, const struct learner *learner, double step)
{
    int result = examples_learn(examples, &(const struct examples_way){.step = step}, learner);
    return result == 0 ? scoring_time(examples, learner) : -1.0;
}

/* With one setting of ours: what scoring costs, and how many postings there are. */
static int measure_weights(struct examples *examples, double specificity, double step,
                           const char *name)
{
    struct learner learner = {0};
    uint32_t *postings = calloc(examples->words + 1, sizeof *postings);
    if (!postings || weights_learner_new(examples->tags, specificity, &learner) < 0) {
        free(postings);
        return -1;
    }
    double seconds = learn_and_score(examples, &learner, step);
    if (weights_learner_count(&learner, postings, examples->words) < 0) {
        seconds = -1.0;
    }
    printf("\"%s\": {\"score_s\": %.9f, \"postings\": %.1f}, ", name, seconds,
           postings_of_items(examples, postings));
    learner.free(learner.self);
    free(postings);
    return seconds < 0.0 ? -1 : 0;
}

/* In the plain layout, with the full index: what scoring costs. */
static int measure_plain(struct examples *examples, double step)
{
    struct learner learner = {0};
    if (plain_learner_new(examples->words, examples->tags, &learner) < 0) {
        return -1;
    }
    double seconds = learn_and_score(examples, &learner, step);
    printf("\"plain\": {\"score_s\": %.9f}, ", seconds);
    learner.free(learner.self);
    return seconds < 0.0 ? -1 : 0;
}

int main(int argc, char **argv)
{
    struct examples examples;
    if (argc != 3) {
        (void)fprintf(stderr, "usage: reading_bench EXAMPLES STEP\n");
        return EXIT_FAILURE;
    }
    if (examples_read(argv[1], &examples) < 0) {
        return EXIT_FAILURE;
    }
    double step = strtod(argv[2], NULL);
    printf("{");
    int code = measure_weights(&examples, DEFAULT_SPECIFICITY, step, "kept") < 0 ||
               measure_weights(&examples, 0.0, step, "full") < 0 ||
               measure_plain(&examples, step) < 0;
    printf("\"read_bytes_per_s\": %.0f}\n", reading_rate());
    examples_deinit(&examples);
    return code ? EXIT_FAILURE : EXIT_SUCCESS;
}
