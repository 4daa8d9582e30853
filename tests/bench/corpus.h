/*
 * corpus: a corpus of JSON Lines in memory, for the benchmarks: the first 80 % to be learned, the
 * rest to be asked about, as tests/quality has it.
 */
#ifndef UNDERTAG_BENCH_CORPUS_H
#define UNDERTAG_BENCH_CORPUS_H

#include <jansson.h>
#include <stdio.h>
#include <stdlib.h>
#include <sys/resource.h>
#include <time.h>

struct corpus {
    json_t **items;
    size_t count;
    size_t learned; /* the first of those to be asked about */
};

static inline void corpus_free(struct corpus *corpus)
{
    for (size_t i = 0; i < corpus->count; i++) {
        json_decref(corpus->items[i]);
    }
    free(corpus->items);
}

/* 0, or -1 with a sentence on standard error. */
static inline int corpus_read(const char *path, struct corpus *ret_corpus)
{
    struct corpus corpus = {0};
    size_t capacity = 0;
    FILE *file = fopen(path, "re");
    if (!file) {
        perror(path);
        return -1;
    }
    for (;;) {
        json_t *item = json_loadf(file, JSON_DISABLE_EOF_CHECK, NULL);
        if (!item) {
            break; /* the end */
        }
        if (corpus.count == capacity) {
            capacity = capacity ? capacity * 2 : 1024;
            json_t **items = realloc(corpus.items, capacity * sizeof *corpus.items);
            if (!items) {
                json_decref(item);
                break;
            }
            corpus.items = items;
        }
        corpus.items[corpus.count++] = item;
    }
    (void)fclose(file); /* it was only read */
    corpus.learned = corpus.count * 4 / 5;
    if (corpus.learned == 0) {
        (void)fprintf(stderr, "%s: there are too few items\n", path);
        corpus_free(&corpus);
        return -1;
    }
    *ret_corpus = corpus;
    return 0;
}

static inline double bench_now_s(void)
{
    struct timespec now;
    (void)clock_gettime(CLOCK_MONOTONIC, &now); /* always there on Linux */
    return (double)now.tv_sec + (double)now.tv_nsec * 1e-9;
}

/* What this process has had of the processors: for what runs on one core and never waits, so that
 * others who are busy count less. */
static inline double bench_cpu_s(void)
{
    struct timespec used;
    (void)clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &used); /* always there on Linux */
    return (double)used.tv_sec + (double)used.tv_nsec * 1e-9;
}

/* The most memory this process has held, in bytes. */
static inline double bench_memory_bytes(void)
{
    struct rusage usage;
    (void)getrusage(RUSAGE_SELF, &usage); /* fails only for a wrong argument */
    return (double)usage.ru_maxrss * 1024.0;
}

#endif
