/*
 * The gate, with standard error turned into a pipe. The daemon is of user 200, its socket of group
 * 300; options are the defaults.
 */
#include "daemon/gate.h"

#include <fcntl.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include <cmocka.h>

static const uint32_t SOCKET_GROUP[] = {300};
static const struct rights_peer EDITOR = {.uid = 1911, .gids = SOCKET_GROUP, .gid_count = 1};
static const struct rights_peer STRANGER = {.uid = 1912};

static const struct method FILES = {"item.file", METHOD_CHANGE, RIGHT_FILE, NULL};
static const struct method REBUILDS = {"daemon.rebuild", METHOD_READ, RIGHT_OPERATE, NULL};

struct gated {
    struct options options;
    struct gate gate;
    struct fault fault;
    int own_stderr;
    int pipe[2];
    char text[8192];
};

static int setup(void **state)
{
    struct gated *gated = calloc(1, sizeof *gated);
    assert_non_null(gated);
    options_defaults(&gated->options);
    gated->gate =
        (struct gate){.options = &gated->options, .house = {.owner = 200, .socket_group = 300}};
    gated->own_stderr = dup(STDERR_FILENO);
    assert_true(gated->own_stderr >= 0);
    assert_int_equal(pipe2(gated->pipe, O_NONBLOCK), 0);
    assert_int_equal(dup2(gated->pipe[1], STDERR_FILENO), STDERR_FILENO);
    *state = gated;
    return 0;
}

static int teardown(void **state)
{
    struct gated *gated = *state;
    assert_int_equal(dup2(gated->own_stderr, STDERR_FILENO), STDERR_FILENO);
    assert_int_equal(close(gated->own_stderr), 0);
    assert_int_equal(close(gated->pipe[0]) | close(gated->pipe[1]), 0);
    free(gated);
    return 0;
}

static int check(struct gated *gated, const struct method *method, const struct rights_peer *peer,
                 uint64_t now_ms)
{
    gated->fault = (struct fault){0};
    return gate_check(&gated->gate, method, peer, now_ms, &gated->fault);
}

/* What was logged since the last time. */
static const char *logged(struct gated *gated)
{
    ssize_t got = read(gated->pipe[0], gated->text, sizeof gated->text - 1);
    gated->text[got > 0 ? got : 0] = '\0';
    return gated->text;
}

static size_t count_lines(const char *text)
{
    size_t lines = 0;
    for (const char *at = strchr(text, '\n'); at; at = strchr(at + 1, '\n')) {
        lines++;
    }
    return lines;
}

static void who_has_the_right_passes_without_a_line(void **state)
{
    struct gated *gated = *state;
    assert_int_equal(check(gated, &FILES, &EDITOR, 0), 0);
    assert_string_equal(logged(gated), "");
}

/* The contract's code, and a sentence with the method, the right, who asked, and the option. */
static void a_refusal_says_what_is_missing_and_what_would_grant_it(void **state)
{
    struct gated *gated = *state;
    assert_int_equal(check(gated, &REBUILDS, &EDITOR, 0), -32004);
    assert_string_equal(gated->fault.message,
                        "daemon.rebuild takes the right to operate the daemon, which user 1911 "
                        "does not have; the daemon's option may_operate grants it.");
    assert_string_equal(gated->fault.field, "");
}

static void a_refusal_is_logged(void **state)
{
    struct gated *gated = *state;
    assert_int_equal(check(gated, &FILES, &STRANGER, 0), FAULT_FORBIDDEN);
    assert_non_null(strstr(logged(gated), "refused: item.file to user 1912"));
}

static void a_peer_without_a_name_is_refused_as_such(void **state)
{
    struct gated *gated = *state;
    const struct rights_peer unknown = {.uid = RIGHTS_NO_ID};
    assert_int_equal(check(gated, &FILES, &unknown, 0), FAULT_FORBIDDEN);
    assert_non_null(strstr(gated->fault.message, "does not say who you are"));
    assert_non_null(strstr(logged(gated), "does not name"));
}

static void a_flood_of_refusals_is_a_few_lines_and_a_number(void **state)
{
    struct gated *gated = *state;
    for (int i = 0; i < 1000; i++) {
        assert_int_equal(check(gated, &FILES, &STRANGER, 50), FAULT_FORBIDDEN);
    }
    assert_int_equal(count_lines(logged(gated)), LOG_LIMIT_LINES);
    gate_tell(&gated->gate, 50 + LOG_LIMIT_SPAN_MS);
    assert_non_null(strstr(logged(gated), "995 more")); /* 1,000 - 5 */
}

static void the_options_of_the_moment_count(void **state)
{
    struct gated *gated = *state;
    char error[OPTIONS_ERROR_BYTES];
    assert_int_equal(options_set(&gated->options, "may_file", "1912", error), 0);
    assert_int_equal(check(gated, &FILES, &STRANGER, 0), 0);
    assert_int_equal(check(gated, &FILES, &EDITOR, 0), FAULT_FORBIDDEN);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, setup, teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(who_has_the_right_passes_without_a_line),
        TEST(a_refusal_says_what_is_missing_and_what_would_grant_it),
        TEST(a_refusal_is_logged),
        TEST(a_peer_without_a_name_is_refused_as_such),
        TEST(a_flood_of_refusals_is_a_few_lines_and_a_number),
        TEST(the_options_of_the_moment_count),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
