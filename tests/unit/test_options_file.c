/* Files of options: what they set, and what is wrong with them told with file and line. */
#include "daemon/options.h"

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

struct configured {
    char path[512]; /* a file to write options into */
    struct options options;
    char error[OPTIONS_ERROR_BYTES];
};

static int setup(void **state)
{
    struct configured *configured = calloc(1, sizeof *configured);
    assert_non_null(configured);
    const char *parent = getenv("TMPDIR");
    (void)snprintf(configured->path, sizeof configured->path, "%s/undertag-options-XXXXXX",
                   parent ? parent : "/tmp");
    int file = mkstemp(configured->path);
    assert_true(file >= 0);
    assert_int_equal(close(file), 0);
    options_defaults(&configured->options);
    *state = configured;
    return 0;
}

static int teardown(void **state)
{
    struct configured *configured = *state;
    assert_int_equal(unlink(configured->path), 0);
    free(configured);
    return 0;
}

static int set(struct configured *configured, const char *name, const char *value)
{
    configured->error[0] = '\0';
    return options_set(&configured->options, name, value, configured->error);
}

static int read_text(struct configured *configured, const char *text)
{
    FILE *file = fopen(configured->path, "w");
    assert_non_null(file);
    assert_true(fputs(text, file) >= 0);
    assert_int_equal(fclose(file), 0);
    configured->error[0] = '\0';
    return options_read_file(&configured->options, configured->path, configured->error);
}

/* That reading fails with "PATH, " and then what is expected, and leaves the options alone. */
static void assert_wrong(struct configured *configured, const char *text, const char *expected)
{
    char sentence[1024];
    struct options before = configured->options;
    assert_int_equal(read_text(configured, text), -1);
    (void)snprintf(sentence, sizeof sentence, "%s, %s", configured->path, expected);
    assert_string_equal(configured->error, sentence);
    assert_memory_equal(&configured->options, &before, sizeof before);
}

static void a_file_sets_what_it_names_and_leaves_the_rest(void **state)
{
    struct configured *configured = *state;
    assert_int_equal(set(configured, "tags_limit", "5"), 0);
    assert_int_equal(read_text(configured, "# for the harbour desk\n"
                                           "\n"
                                           "connections = 12 ; a few\n"
                                           "loss=hinge\n"
                                           "language =\n"),
                     0);
    assert_int_equal(configured->options.connections_limit, 12);
    assert_int_equal(configured->options.loss, SURROGATE_HINGE);
    assert_int_equal(configured->options.tags_limit, 5);
}

static void an_unknown_option_is_told_with_file_and_line(void **state)
{
    assert_wrong(*state, "\nconnections = 5\nlamps = 3\n",
                 "line 3: there is no option 'lamps' (see config/undertag.ini for those there "
                 "are)");
}

static void a_repeated_option_is_told_with_file_and_line(void **state)
{
    assert_wrong(*state, "connections = 5\ntags_limit = 5\nconnections = 5\n",
                 "line 3: option connections is set twice");
}

static void a_value_out_of_range_is_told_with_file_and_line(void **state)
{
    assert_wrong(*state, "# few\nconnections = 0\n",
                 "line 2: option connections is a whole number from 1 to 100000, not '0'");
}

static void a_section_is_told_with_file_and_line(void **state)
{
    const char *sentence = "line 2: there are no sections: options stand by themselves";
    assert_wrong(*state, "tags_limit = 5\n[wire]\nconnections = 5\n", sentence);
    assert_wrong(*state, "tags_limit = 5\n[wire]\n", sentence);
}

static void a_line_without_a_value_is_told_with_file_and_line(void **state)
{
    assert_wrong(*state, "connections\n", "line 1: it is not of the form name = value");
}

static void of_several_wrong_lines_the_first_is_told(void **state)
{
    assert_wrong(*state, "connections\nlamps = 1\n", "line 1: it is not of the form name = value");
    assert_wrong(*state, "tags_limit = 0\nconnections\n",
                 "line 1: option tags_limit is a whole number from 1 to 100000, not '0'");
    assert_wrong(*state, "tags_limit = 0\ntags_limit = 1\n",
                 "line 1: option tags_limit is a whole number from 1 to 100000, not '0'");
}

static void an_indented_line_is_a_line_of_its_own(void **state)
{
    struct configured *configured = *state;
    assert_int_equal(read_text(configured, "connections = 5\n  tags_limit = 6\n\t# end\n"), 0);
    assert_int_equal(configured->options.connections_limit, 5);
    assert_int_equal(configured->options.tags_limit, 6);
}

static void a_comment_may_be_as_long_as_it_likes(void **state)
{
    struct configured *configured = *state;
    char text[2000];
    memset(text, 'x', sizeof text);
    text[0] = '#';
    (void)snprintf(text + 1000, sizeof text - 1000, "\nconnections = 5\nlamps = 1\n");
    assert_wrong(configured, text,
                 "line 3: there is no option 'lamps' (see config/undertag.ini for those there "
                 "are)");
    (void)snprintf(text + 1000, sizeof text - 1000, "\nconnections = 5\n");
    assert_int_equal(read_text(configured, text), 0);
    assert_int_equal(configured->options.connections_limit, 5);
}

static void a_line_that_is_too_long_is_not_read_by_half(void **state)
{
    char text[2000];
    (void)snprintf(text, sizeof text, "tags_limit = 5%1000s0\n", "");
    assert_wrong(*state, text, "line 1: the line is too long");
}

static void a_last_line_needs_no_end(void **state)
{
    struct configured *configured = *state;
    assert_int_equal(read_text(configured, "connections = 5"), 0);
    assert_int_equal(configured->options.connections_limit, 5);
    assert_int_equal(read_text(configured, ""), 0);
}

static void what_cannot_be_read_is_told(void **state)
{
    struct configured *configured = *state;
    struct options *options = &configured->options;
    assert_int_equal(options_read_file(options, "/nowhere/at/all.ini", configured->error), -1);
    assert_string_equal(configured->error,
                        "/nowhere/at/all.ini cannot be read: No such file or directory");
    assert_int_equal(options_read_file(options, "/", configured->error), -1);
    assert_string_equal(configured->error, "/ cannot be read: Is a directory");
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, setup, teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_file_sets_what_it_names_and_leaves_the_rest),
        TEST(an_unknown_option_is_told_with_file_and_line),
        TEST(a_repeated_option_is_told_with_file_and_line),
        TEST(a_value_out_of_range_is_told_with_file_and_line),
        TEST(a_section_is_told_with_file_and_line),
        TEST(a_line_without_a_value_is_told_with_file_and_line),
        TEST(of_several_wrong_lines_the_first_is_told),
        TEST(an_indented_line_is_a_line_of_its_own),
        TEST(a_comment_may_be_as_long_as_it_likes),
        TEST(a_line_that_is_too_long_is_not_read_by_half),
        TEST(a_last_line_needs_no_end),
        TEST(what_cannot_be_read_is_told),
    };
    return cmocka_run_group_tests_name("options file", tests, NULL, NULL);
}
