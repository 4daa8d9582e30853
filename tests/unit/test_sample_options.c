/*
 * The sample configuration, config/undertag.ini: every option stands in it, commented out, with its
 * default and its sentence, in the table's order. Run from the top of the tree.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include <cmocka.h>

#include "daemon/options.h"

static const char sample_path[] = "config/undertag.ini";

enum {
    LINE_BYTES = 256
};

static FILE *open_sample(void)
{
    FILE *sample = fopen(sample_path, "r");
    if (!sample) {
        fail_msg("%s is not here: run this from the top of the tree", sample_path);
    }
    return sample;
}

/* An option that is commented out has nothing between the mark and its name. */
static bool is_option(const char *line)
{
    return line[0] == '#' && line[1] != ' ' && line[1] != '\n';
}

/* Writes the sample with the marks of its options taken off. */
static void write_unmarked(FILE *to)
{
    char line[LINE_BYTES];
    FILE *sample = open_sample();
    while (fgets(line, sizeof line, sample)) {
        assert_true(fputs(is_option(line) ? line + 1 : line, to) >= 0);
    }
    assert_int_equal(fclose(sample), 0);
}

/* Reads the options of a file over values that are none of the defaults. */
static int read_over_others(const char *path, struct options *options, char *error)
{
    static const char *const pairs[] = {"line_limit=1MiB", "connections=5", "unknown_tags=refuse",
                                        "loss=hinge",      "language=en",   "title_weight=3"};
    options_defaults(options);
    for (size_t i = 0; i < sizeof pairs / sizeof pairs[0]; i++) {
        assert_int_equal(options_set_pair(options, pairs[i], error), 0);
    }
    return options_read_file(options, path, error);
}

static void with_the_marks_taken_off_it_reads_as_the_defaults(void **state)
{
    (void)state;
    char path[512];
    char error[OPTIONS_ERROR_BYTES] = "";
    struct options options;
    struct options defaults;
    const char *parent = getenv("TMPDIR");
    (void)snprintf(path, sizeof path, "%s/undertag-sample-XXXXXX", parent ? parent : "/tmp");
    int file = mkstemp(path);
    assert_true(file >= 0);
    FILE *unmarked = fdopen(file, "w");
    assert_non_null(unmarked);
    write_unmarked(unmarked);
    assert_int_equal(fclose(unmarked), 0);
    int result = read_over_others(path, &options, error);
    assert_int_equal(unlink(path), 0);
    if (result != 0) {
        fail_msg("%s", error);
    }
    options_defaults(&defaults);
    assert_memory_equal(&options, &defaults, sizeof defaults);
}

static void as_it_is_it_sets_nothing(void **state)
{
    (void)state;
    char error[OPTIONS_ERROR_BYTES] = "";
    struct options options;
    assert_int_equal(read_over_others(sample_path, &options, error), 0);
    assert_int_equal(options.connections_limit, 5);
    assert_int_equal(options.loss, SURROGATE_HINGE);
}

/* Adds a comment's words behind those of the lines before. */
static void add_words(char *words, size_t size, const char *line)
{
    size_t used = strlen(words);
    (void)snprintf(words + used, size - used, "%s", line + 1);
    words[strcspn(words, "\n")] = '\0';
}

static void every_option_is_there_in_order_behind_its_sentence(void **state)
{
    (void)state;
    char line[LINE_BYTES];
    char words[4096] = "";
    struct options defaults;
    size_t place = 0;
    FILE *sample = open_sample();
    options_defaults(&defaults);
    while (fgets(line, sizeof line, sample)) {
        if (line[0] == '\n') {
            words[0] = '\0';
        } else if (!is_option(line)) {
            add_words(words, sizeof words, line);
        } else {
            struct options_row row;
            assert_true(place < options_count());
            options_describe(&defaults, place++, &row);
            size_t bytes = strlen(row.name);
            if (strncmp(line + 1, row.name, bytes) != 0 || line[1 + bytes] != ' ') {
                fail_msg("%s should come where %s stands", row.name, line);
            }
            if (!strstr(words, row.sentence)) {
                fail_msg("%s stands behind: %s", row.name, words);
            }
        }
    }
    assert_int_equal(fclose(sample), 0);
    assert_int_equal(place, options_count());
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(with_the_marks_taken_off_it_reads_as_the_defaults),
        cmocka_unit_test(as_it_is_it_sets_nothing),
        cmocka_unit_test(every_option_is_there_in_order_behind_its_sentence),
    };
    return cmocka_run_group_tests_name("sample configuration", tests, NULL, NULL);
}
