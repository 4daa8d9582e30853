/* What undertagd was started with. */
#include "daemon/command_line.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <getopt.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sysexits.h>
#include <unistd.h>

#include "tests/unit/store_fixture.h"

enum {
    ARGUMENTS = 12
};

struct started {
    struct command_line line;
    char error[COMMAND_LINE_ERROR_BYTES];
};

static int set_up(void **state)
{
    static struct started fixture;
    fixture = (struct started){0};
    *state = &fixture;
    return setenv("XDG_STATE_HOME", "/srv/state", 1) | setenv("XDG_RUNTIME_DIR", "/run/user/7", 1);
}

static int tear_down(void **state)
{
    struct started *fixture = *state;
    command_line_deinit(&fixture->line);
    return 0;
}

/* Reads "undertagd" with these arguments, up to a NULL. */
static int read_arguments(struct started *fixture, const char *const *arguments)
{
    char *argv[ARGUMENTS + 2] = {(char *)"undertagd"};
    int argc = 1;
    for (size_t i = 0; arguments[i]; i++) {
        assert_true(argc <= ARGUMENTS);
        argv[argc++] = (char *)arguments[i]; /* getopt moves the pointers, not the letters */
    }
    optind = 0; /* glibc: from the start */
    command_line_deinit(&fixture->line);
    return command_line_read(argc, argv, &fixture->line, fixture->error);
}

#define READ(fixture, ...) read_arguments(fixture, (const char *const[]){__VA_ARGS__, NULL})
#define READ_NOTHING(fixture) read_arguments(fixture, (const char *const[]){NULL})

/* --- options --- */

static void a_backup_to_restore_is_a_path(void **state)
{
    struct started *fixture = *state;
    assert_int_equal(READ(fixture, "--home", "/srv/logbooks"), 0);
    assert_null(fixture->line.restore);
    assert_int_equal(READ(fixture, "--restore", "/srv/out/monday"), 0);
    assert_string_equal(fixture->line.restore, "/srv/out/monday");
    assert_int_equal(READ(fixture, "--restore="), EX_USAGE);
    assert_int_equal(READ(fixture, "--restore"), EX_USAGE);
}

static void every_option_is_taken(void **state)
{
    struct started *fixture = *state;
    assert_int_equal(READ(fixture, "--home", "/srv/logbooks", "--socket=/run/logbooks", "--config",
                          "trust.ini", "--set", "connections=8", "--check-config", "--set",
                          "step=0.5"),
                     0);
    assert_string_equal(fixture->line.home, "/srv/logbooks");
    assert_string_equal(fixture->line.socket, "/run/logbooks");
    assert_false(fixture->line.socket_is_default);
    assert_string_equal(fixture->line.config, "trust.ini");
    assert_int_equal(fixture->line.setting_count, 2);
    assert_string_equal(fixture->line.settings[0], "connections=8");
    assert_string_equal(fixture->line.settings[1], "step=0.5");
    assert_true(fixture->line.check_config);
    assert_false(fixture->line.version);
    assert_false(fixture->line.help);
}

static void version_and_help_may_be_asked_for(void **state)
{
    struct started *fixture = *state;
    assert_int_equal(READ(fixture, "--version"), 0);
    assert_true(fixture->line.version);
    assert_int_equal(READ(fixture, "--help"), 0);
    assert_true(fixture->line.help);
    assert_non_null(strstr(COMMAND_LINE_HELP, "--check-config"));
}

static void nothing_is_asked_for_by_default(void **state)
{
    struct started *fixture = *state;
    assert_int_equal(READ_NOTHING(fixture), 0);
    assert_null(fixture->line.config);
    assert_int_equal(fixture->line.setting_count, 0);
    assert_false(fixture->line.check_config);
}

/* --- places --- */

static void places_come_from_the_environment(void **state)
{
    struct started *fixture = *state;
    assert_int_equal(READ_NOTHING(fixture), 0);
    assert_string_equal(fixture->line.home, "/srv/state/undertag");
    assert_string_equal(fixture->line.socket, "/run/user/7/undertag/socket");
    assert_true(fixture->line.socket_is_default);
}

/* The XDG Base Directory Specification: "either not set or empty". */
static void an_empty_variable_counts_as_none(void **state)
{
    struct started *fixture = *state;
    (void)setenv("XDG_STATE_HOME", "", 1);
    (void)setenv("XDG_RUNTIME_DIR", "", 1);
    (void)setenv("HOME", "/home/keeper", 1);
    assert_int_equal(READ_NOTHING(fixture), 0);
    assert_string_equal(fixture->line.home,
                        getuid() == 0 ? "/var/lib/undertag" : "/home/keeper/.local/state/undertag");
    assert_string_equal(fixture->line.socket, "/run/undertag/socket");
}

static void a_place_that_is_given_needs_no_environment(void **state)
{
    struct started *fixture = *state;
    char path[COMMAND_LINE_PATH_BYTES + 1];
    memset(path, 'a', sizeof path);
    path[COMMAND_LINE_PATH_BYTES] = '\0';
    (void)setenv("XDG_STATE_HOME", path, 1);
    assert_int_equal(READ(fixture, "--home", "/srv/logbooks"), 0);
    assert_string_equal(fixture->line.home, "/srv/logbooks");
    assert_int_equal(READ_NOTHING(fixture), EX_USAGE);
    assert_string_equal(fixture->error,
                        "a path from the environment is too long; see undertagd --help");
}

/* --- what is wrong --- */

static void what_is_no_option_is_named(void **state)
{
    struct started *fixture = *state;
    static const char *const WRONG[] = {"--hom-e", "--version=2", "serve", "-x", "-"};
    for (size_t i = 0; i < sizeof WRONG / sizeof WRONG[0]; i++) {
        char sentence[128];
        assert_int_equal(READ(fixture, "--check-config", WRONG[i]), EX_USAGE);
        (void)snprintf(sentence, sizeof sentence, "%s is no option; see undertagd --help",
                       WRONG[i]);
        assert_string_equal(fixture->error, sentence);
    }
}

static void the_first_of_several_letters_is_named(void **state)
{
    struct started *fixture = *state;
    assert_int_equal(READ(fixture, "--check-config", "-xy"), EX_USAGE);
    assert_string_equal(fixture->error, "-x is no option; see undertagd --help");
}

static void an_option_that_takes_a_value_needs_one(void **state)
{
    struct started *fixture = *state;
    static const char *const OPTIONS[] = {"--home", "--socket", "--config", "--set"};
    for (size_t i = 0; i < sizeof OPTIONS / sizeof OPTIONS[0]; i++) {
        char sentence[128];
        assert_int_equal(READ(fixture, OPTIONS[i]), EX_USAGE);
        (void)snprintf(sentence, sizeof sentence, "%s takes a value; see undertagd --help",
                       OPTIONS[i]);
        assert_string_equal(fixture->error, sentence);
    }
}

static void a_place_is_a_path(void **state)
{
    struct started *fixture = *state;
    char path[COMMAND_LINE_PATH_BYTES + 1];
    memset(path, 'a', sizeof path);
    path[COMMAND_LINE_PATH_BYTES] = '\0';
    assert_int_equal(READ(fixture, "--home", ""), EX_USAGE);
    assert_string_equal(fixture->error, "--home takes a path; see undertagd --help");
    assert_int_equal(READ(fixture, "--socket", path), EX_USAGE);
    assert_string_equal(fixture->error, "--socket takes a path; see undertagd --help");
    path[COMMAND_LINE_PATH_BYTES - 1] = '\0';
    assert_int_equal(READ(fixture, "--home", path), 0);
    assert_string_equal(fixture->line.home, path);
}

/* --- the options --- */

static void settings_go_over_the_file_and_the_file_over_the_defaults(void **state)
{
    struct started *fixture = *state;
    struct options options;
    char home[FIXTURE_PATH_BYTES];
    char path[FIXTURE_PATH_BYTES + 16];
    home_make(home);
    (void)snprintf(path, sizeof path, "%s/trust.ini", home);
    FILE *file = fopen(path, "w");
    assert_non_null(file);
    assert_true(fputs("connections = 8\ntags_limit = 9\n", file) >= 0);
    assert_int_equal(fclose(file), 0);
    assert_int_equal(READ(fixture, "--set", "tags_limit=10", "--config", path), 0);
    assert_int_equal(command_line_options(&fixture->line, &options, fixture->error), 0);
    assert_int_equal(options.connections_limit, 8);
    assert_int_equal(options.tags_limit, 10);
    assert_int_equal(options.words_limit, 20000); /* the wire contract's default */
    home_remove(home);
}

static void a_wrong_option_or_file_is_an_error_of_configuration(void **state)
{
    struct started *fixture = *state;
    struct options options = {.tags_limit = 77};
    assert_int_equal(READ(fixture, "--set", "tags_limit=many"), 0);
    assert_int_equal(command_line_options(&fixture->line, &options, fixture->error), EX_CONFIG);
    assert_non_null(strstr(fixture->error, "tags_limit"));
    assert_int_equal(READ(fixture, "--config", "/none/trust.ini"), 0);
    assert_int_equal(command_line_options(&fixture->line, &options, fixture->error), EX_CONFIG);
    assert_non_null(strstr(fixture->error, "/none/trust.ini"));
    assert_int_equal(options.tags_limit, 77);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(every_option_is_taken),
        TEST(a_backup_to_restore_is_a_path),
        TEST(version_and_help_may_be_asked_for),
        TEST(nothing_is_asked_for_by_default),
        TEST(places_come_from_the_environment),
        TEST(an_empty_variable_counts_as_none),
        TEST(a_place_that_is_given_needs_no_environment),
        TEST(what_is_no_option_is_named),
        TEST(the_first_of_several_letters_is_named),
        TEST(an_option_that_takes_a_value_needs_one),
        TEST(a_place_is_a_path),
        TEST(settings_go_over_the_file_and_the_file_over_the_defaults),
        TEST(a_wrong_option_or_file_is_an_error_of_configuration),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
