/*
 * learner_bench: the learner alone, in one process and on one thread: texts into features, features
 * learned; then questions about the rest of the corpus. No socket, no disk.
 *
 *   learner_bench CORPUS.jsonl
 */
#include <stdint.h>
#include <string.h>

#include "daemon/learner/model.h"
#include "daemon/options.h"
#include "daemon/text/dictionary.h"
#include "tests/bench/corpus.h"

struct bench {
    struct features *features;
    struct dictionary *tag_names;
    struct model *model;
    struct model_scratch *scratch;
    uint32_t *tags;
    size_t tag_capacity;
    uint64_t learned;
};

static int extract(struct bench *bench, const json_t *item)
{
    const json_t *title = json_object_get(item, "title");
    const json_t *text = json_object_get(item, "text");
    const struct features_source source = {.title = json_string_value(title),
                                           .title_bytes = json_string_length(title),
                                           .text = json_string_value(text),
                                           .text_bytes = json_string_length(text)};
    return features_extract(bench->features, &source, SIZE_MAX);
}

static int compare_tags(const void *left, const void *right)
{
    uint32_t a = *(const uint32_t *)left;
    uint32_t b = *(const uint32_t *)right;
    return (a > b) - (a < b);
}

/* In rising order, as the learner wants them. */
static int number_tags(struct bench *bench, const json_t *tags, size_t *ret_count)
{
    size_t count = json_array_size(tags);
    if (count > bench->tag_capacity) {
        uint32_t *grown = realloc(bench->tags, count * sizeof *grown);
        if (!grown) {
            return -1;
        }
        bench->tags = grown;
        bench->tag_capacity = count;
    }
    for (size_t i = 0; i < count; i++) {
        const json_t *tag = json_array_get(tags, i);
        if (dictionary_intern(bench->tag_names, NULL, json_string_value(tag),
                              json_string_length(tag), &bench->tags[i]) < 0) {
            return -1;
        }
    }
    if (count > 1) {
        qsort(bench->tags, count, sizeof *bench->tags, compare_tags);
    }
    *ret_count = count;
    return 0;
}

static int learn(struct bench *bench, const json_t *item)
{
    size_t tag_count = 0;
    if (extract(bench, item) < 0 ||
        number_tags(bench, json_object_get(item, "tags"), &tag_count) < 0) {
        return -1;
    }
    const struct model_item learned = {.number = ++bench->learned,
                                       .features = features_list(bench->features),
                                       .feature_count = features_count(bench->features),
                                       .tags = bench->tags,
                                       .tag_count = tag_count};
    return model_learn(bench->model, &learned, NULL, bench->scratch);
}

static int ask(struct bench *bench, const json_t *item)
{
    if (extract(bench, item) < 0) {
        return -1;
    }
    const struct model_question question = {.features = features_list(bench->features),
                                            .feature_count = features_count(bench->features),
                                            .most = 10,
                                            .floor = 0.05};
    struct model_answer answer;
    return model_ask(bench->model, &question, bench->scratch, &answer);
}

/* The learner as the daemon has it without any configuration. */
static int open_bench(struct bench *bench)
{
    static const struct siphash_key KEY = {1, 2};
    struct options options;
    options_defaults(&options);
    struct features_settings features = options_features_settings(&options);
    features.key = KEY;
    const struct model_settings model = options_model_settings(&options);
    if (features_new(&features, &bench->features) < 0 ||
        dictionary_new(&KEY, &bench->tag_names) < 0 || model_new(&model, &KEY, &bench->model) < 0 ||
        model_scratch_new(&bench->scratch) < 0) {
        return -1;
    }
    return 0;
}

static void close_bench(struct bench *bench)
{
    features_free(bench->features);
    dictionary_free(bench->tag_names);
    model_free(bench->model);
    model_scratch_free(bench->scratch);
    free(bench->tags);
}

static int run(struct bench *bench, const struct corpus *corpus)
{
    double begun = bench_now_s();
    double memory = bench_memory_bytes();
    for (size_t i = 0; i < corpus->learned; i++) {
        if (learn(bench, corpus->items[i]) < 0) {
            return -1;
        }
    }
    double learned = bench_now_s();
    for (size_t i = corpus->learned; i < corpus->count; i++) {
        if (ask(bench, corpus->items[i]) < 0) {
            return -1;
        }
    }
    double asked = bench_now_s();
    struct model_size size;
    model_measure(bench->model, &size);
    printf("{\"items_per_s\": %.0f, \"questions_per_s\": %.0f, \"weights\": %llu, "
           "\"memory_bytes\": %.0f}\n",
           (double)corpus->learned / (learned - begun),
           (double)(corpus->count - corpus->learned) / (asked - learned),
           (unsigned long long)size.postings, bench_memory_bytes() - memory);
    return 0;
}

int main(int argc, char **argv)
{
    struct bench bench = {0};
    struct corpus corpus;
    if (argc != 2) {
        (void)fprintf(stderr, "usage: learner_bench CORPUS.jsonl\n");
        return EXIT_FAILURE;
    }
    if (corpus_read(argv[1], &corpus) < 0) {
        return EXIT_FAILURE;
    }
    int code = open_bench(&bench) < 0 || run(&bench, &corpus) < 0;
    if (code) {
        (void)fprintf(stderr, "learner_bench: there is no memory\n");
    }
    close_bench(&bench);
    corpus_free(&corpus);
    return code ? EXIT_FAILURE : EXIT_SUCCESS;
}
