/*
 * text_bench: how fast texts become features. Reads one text a line from standard input, takes them
 * all once to warm up, then several times against the clock.
 *
 *   text_bench [LANGUAGE [pairs]] < texts
 *
 * LANGUAGE turns stemming on; "" leaves it off.
 */
#include <errno.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "daemon/text/features.h"

enum {
    ROUNDS = 5,
    MOST_TERMS = 20000
};

struct texts {
    char *data;
    size_t bytes;
};

static int read_all(FILE *input, struct texts *texts)
{
    size_t capacity = 0;
    for (;;) {
        if (texts->bytes == capacity) {
            capacity = capacity ? capacity * 2 : 1 << 20;
            char *data = realloc(texts->data, capacity);
            if (!data) {
                return -ENOMEM;
            }
            texts->data = data;
        }
        size_t got = fread(texts->data + texts->bytes, 1, capacity - texts->bytes, input);
        texts->bytes += got;
        if (got == 0) {
            return ferror(input) ? -EIO : 0;
        }
    }
}

struct counts {
    size_t items;
    size_t terms; /* different ones of an item, summed */
    size_t too_many;
    double words; /* the frequencies summed */
};

static int extract_all(struct features *features, const struct texts *texts, struct counts *counts)
{
    for (size_t at = 0; at < texts->bytes;) {
        const char *line = texts->data + at;
        const char *end = memchr(line, '\n', texts->bytes - at);
        size_t length = end ? (size_t)(end - line) : texts->bytes - at;
        struct features_source source = {.text = line, .text_bytes = length};
        int error = features_extract(features, &source, MOST_TERMS);
        if (error < 0 && error != -E2BIG) {
            return error;
        }
        counts->too_many += error == -E2BIG;
        counts->items++;
        counts->terms += features_count(features);
        for (size_t i = 0; i < features_count(features); i++) {
            counts->words += (double)features_list(features)[i].frequency;
        }
        at += length + 1;
    }
    return 0;
}

static double now_s(void)
{
    struct timespec now;
    (void)clock_gettime(CLOCK_MONOTONIC, &now); /* cannot fail for this clock */
    return (double)now.tv_sec + (double)now.tv_nsec * 1e-9;
}

int main(int argc, char **argv)
{
    const char *language = argc > 1 ? argv[1] : "";
    struct features_settings settings = {
        .words = {.stemming = *language != '\0', .pairs = argc > 2, .language = language},
        .title_weight = 1.0,
        .key = {1, 2},
    };
    struct texts texts = {0};
    struct features *features = NULL;
    struct counts counts = {0};
    int status = EXIT_FAILURE;
    if (read_all(stdin, &texts) < 0 || features_new(&settings, &features) < 0 ||
        extract_all(features, &texts, &counts) < 0) {
        fputs("text_bench: cannot read the texts\n", stderr);
        goto out;
    }
    if (counts.items == 0) {
        fputs("text_bench: there is no text on standard input\n", stderr);
        goto out;
    }
    double start_s = now_s();
    counts = (struct counts){0};
    for (int round = 0; round < ROUNDS; round++) {
        if (extract_all(features, &texts, &counts) < 0) {
            fputs("text_bench: out of memory\n", stderr);
            goto out;
        }
    }
    double seconds = now_s() - start_s;
    size_t items = counts.items / ROUNDS;
    printf("%zu items of %.0f bytes, %.1f words, %.1f terms; %zu with too many terms\n", items,
           (double)texts.bytes / (double)items, counts.words / (double)counts.items,
           (double)counts.terms / (double)counts.items, counts.too_many / ROUNDS);
    printf("%.1f MB/s, %.2f million words/s, %.0f items/s\n",
           (double)texts.bytes * ROUNDS / seconds / 1e6, counts.words / seconds / 1e6,
           (double)counts.items / seconds);
    status = EXIT_SUCCESS;
out:
    features_free(features);
    free(texts.data);
    return status;
}
